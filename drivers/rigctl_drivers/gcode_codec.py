"""What G-code motion firmware writes: one line in, one value out.

It owns the grammar of the lines and the text of commands. It does no I/O. What is no line of this convention
raises `FramingError`, and nothing else.

Source: the open documentation of the firmware convention with one-line status reports, from memory; the traps
were measured on a firmware simulator.
"""

import re
from collections.abc import Mapping
from dataclasses import dataclass

from rigctl.errors import FramingError
from rigctl.interfaces import Identity
from rigctl.links.numbers import parse_real

REPORT = b"?"
HOLD = b"!"
RESET = b"\x18"
"""Real-time bytes: they act at once, even while the line queue is full, and take no line end."""
CLEAR = b"\n"
"""An empty line: acknowledged with `ok`, and clears an error that else refuses every further line."""
HOME = b"$H\n"
BUILD = b"$I\n"

AXES = "XYZABC"
"""Order of the axes in a report."""

_MOVING = ("Run", "Jog", "Home")
_STATES = ("Idle", "Hold", "Alarm", "Door", "Check", "Sleep", *_MOVING)
_ACK = re.compile(r"ok|error:([0-9]{1,3})")
_ALARM = re.compile(r"ALARM:([0-9]{1,3})")
_STATE = re.compile(r"([A-Z][a-z]+)(?::([0-9]{1,3}))?")
_GREETING = re.compile(r"[A-Za-z][\w-]* \d[\w.]* \[.*\]")
_SETTING = re.compile(r"\$[0-9]{1,3}=.*")


@dataclass(frozen=True, slots=True)
class Ack:
    """The answer to one line; `error` is None for `ok`."""

    error: int | None = None


@dataclass(frozen=True, slots=True)
class Alarm:
    """The machine stopped by itself."""

    code: int


@dataclass(frozen=True, slots=True)
class Message:
    """A line between brackets: `[VER:1.1:text]`; it acknowledges nothing."""

    key: str
    text: str


@dataclass(frozen=True, slots=True)
class Note:
    """A line that asks for nothing: a greeting, a setting or an empty line."""

    text: str
    is_greeting: bool = False


@dataclass(frozen=True, slots=True)
class Report:
    """A status report.

    `state` is its word without the number that may follow, which is `detail`. Either the machine's position
    or the position in the work frame is there; `offset` is the work frame's zero in the machine's frame and
    stands in some reports only.
    """

    state: str
    detail: int | None
    machine: tuple[float, ...] | None
    work: tuple[float, ...] | None
    offset: tuple[float, ...] | None

    @property
    def is_moving(self) -> bool:
        """Whether it turns, or is about to come to rest."""
        return self.state in _MOVING or (self.state in ("Hold", "Door") and self.detail not in (None, 0))

    @property
    def alarm(self) -> int | None:
        """Number of the alarm, where the state tells it."""
        return self.detail if self.state == "Alarm" else None


Line = Ack | Alarm | Message | Note | Report


def parse_line(line: bytes, *, address: str) -> Line:
    """Tell what a line is, and read it."""
    text = _text(line, address=address)
    if text.startswith("<"):
        return parse_report(line, address=address)
    if found := _ACK.fullmatch(text):
        return Ack(None if found[1] is None else int(found[1]))
    if found := _ALARM.fullmatch(text):
        return Alarm(int(found[1]))
    if text.startswith("[") and text.endswith("]"):
        key, _, rest = text[1:-1].partition(":")
        return Message(key, rest)
    is_greeting = _GREETING.fullmatch(text) is not None
    if is_greeting or not text or _SETTING.fullmatch(text):
        return Note(text, is_greeting)
    raise _no_line("a line that is none of this convention", line, address=address)


def parse_report(line: bytes, *, address: str) -> Report:
    """Read a status report: `<Idle|MPos:0.000,0.000|FS:0,0|WCO:0.000,0.000>`.

    Which fields follow the position changes from report to report; those not needed here are not looked at.
    """
    text = _text(line, address=address)
    if not (text.startswith("<") and text.endswith(">")) or text.count("<") + text.count(">") != 2:
        raise _no_line("no whole status report", line, address=address)
    state, *fields = text[1:-1].split("|")
    found = _STATE.fullmatch(state)
    if found is None or found[1] not in _STATES:
        raise _no_line("a state that is none", line, address=address)
    named = dict(field.partition(":")[::2] for field in fields)
    if len(named) != len(fields) or ("MPos" in named) == ("WPos" in named):
        raise _no_line("a report without one position", line, address=address)
    return Report(
        state=found[1],
        detail=None if found[2] is None else int(found[2]),
        machine=_numbers(named, "MPos", address=address),
        work=_numbers(named, "WPos", address=address),
        offset=_numbers(named, "WCO", address=address),
    )


def is_ack_line(line: bytes) -> bool:
    """Whether a line ends the answer to a line that was sent: an acknowledgement or an alarm."""
    return line.strip() == b"ok" or line.strip().startswith((b"error:", b"ALARM:"))


def is_report_line(line: bytes) -> bool:
    """Whether a line is a status report."""
    return line.strip().startswith(b"<")


def is_greeting_line(line: bytes) -> bool:
    """Whether a line is the greeting after a reset."""
    return _GREETING.fullmatch(line.strip().decode("ascii", "replace")) is not None


def last_alarm(lines: bytes) -> int | None:
    """Return the number of the last alarm among lines of any kind, torn ones too; None: there is none."""
    found = _ALARM.findall(lines.decode("ascii", "replace"))
    return int(found[-1]) if found else None


def parse_build(lines: tuple[bytes, ...], *, address: str) -> Identity:
    """Read the answer to `$I`: `[VER:1.1:simulated mount,mount 1]`.

    The firmware tells its version and a text that its owner gave it, here taken as model and serial number.
    """
    parsed = [parse_line(line, address=address) for line in lines]
    versions = [line.text for line in parsed if isinstance(line, Message) and line.key == "VER"]
    if len(versions) != 1:
        raise _no_line("no build information", b"\n".join(lines), address=address)
    firmware, _, text = versions[0].partition(":")
    model, _, serial = text.partition(",")
    return Identity(maker="", model=model.strip(), serial=serial.strip(), firmware=firmware.strip())


def format_move(axis: str, position_deg: float) -> bytes:
    """Write a move in the machine's own frame, as fast as the axis can, without wrapping at a turn.

    Three decimals are what the firmware reports.
    """
    return f"G90 G53 G0 {axis}{round(position_deg, 3) + 0.0:.3f}\n".encode()


def axis_position(values: tuple[float, ...], axis: str) -> float | None:
    """Return one axis out of a report; a machine with a single axis lists that one. None: it is not there."""
    place = 0 if len(values) == 1 else AXES.index(axis)
    return values[place] if place < len(values) else None


def _numbers(named: Mapping[str, str], key: str, *, address: str) -> tuple[float, ...] | None:
    if key not in named:
        return None
    reals = [parse_real(part, address=address) for part in named[key].split(",")]
    if len(reals) > len(AXES) or any(real.flag is not None for real in reals):
        raise _no_line(f"a {key} that is no position", named[key].encode(), address=address)
    return tuple(real.value for real in reals)


def _text(line: bytes, *, address: str) -> str:
    if any(not 32 <= byte < 127 for byte in line):
        raise _no_line("bytes that are no text", line, address=address)
    return line.decode("ascii").strip()


def _no_line(what: str, got: bytes, *, address: str) -> FramingError:
    return FramingError(
        f"the controller sent {what}: {got[:80]!r}",
        address=address,
        partial=got,
        do="check that the driver fits this controller and its firmware",
    )
