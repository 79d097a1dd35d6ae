"""An instrument that speaks SCPI on a byte stream, as a function of time.

It owns lines, execution in order, replies and the common commands; what is measured or switched is the
device's. A line is one program message; its answers are joined by `;` into one line; a query that fails adds
nothing to it.
"""

from collections import deque
from collections.abc import Iterable
from typing import Protocol

from rigctl_sim.scpi.complaint import Complaint
from rigctl_sim.scpi.parameters import whole_number
from rigctl_sim.scpi.status import OPERATION_COMPLETE, Status
from rigctl_sim.scpi.syntax import Command, Grammar, Unit, Wait

ANSWERS_IN_S = 0.002
"""How long an answer takes: an ordinary exchange on a local network; common practice."""
LONGEST_LINE = 4096
"""Bytes a message may have before the input buffer overruns (-363)."""
_BYTE = whole_number(0, 255, default=0)
_WORD = whole_number(0, 65535, default=0)


class Device(Protocol):
    """What the commands of an instrument act on."""

    status: Status

    def commands(self) -> Iterable[Command]:
        """Return its own commands, without the common ones."""

    def catch_up(self, now_s: float) -> None:
        """Finish what has ended by now."""

    def busy_until_s(self) -> float:
        """Return the instant at which everything under way ends; past when nothing is."""

    def reset(self, now_s: float) -> None:
        """Do what `*RST` does to it."""


class ScpiTwin:
    """The far end of a wire with a device behind it.

    Parameters
    ----------
    identity
        The answer to `*IDN?`.
    """

    def __init__(self, device: Device, *, identity: str) -> None:
        self._device, self._identity, self._status = device, identity, device.status
        self._grammar = Grammar([*self._common(), *_status_commands(device.status), *device.commands()])
        self._arriving = b""
        self._lines: deque[tuple[float, tuple[Unit, ...]]] = deque()
        self._answers: deque[tuple[float, bytes]] = deque()
        self._fields: list[str] = []
        self._unit_number = 0
        self._wait: Wait | None = None
        self._free_from_s = 0.0
        self._is_complete_wanted = self._was_identified = False

    def receive(self, data: bytes, now_s: float) -> None:
        """Take bytes in; every complete line is parsed and executed in its turn."""
        *lines, self._arriving = (self._arriving + data).split(b"\n")
        self._advance(now_s)
        for line in lines:
            units = self._grammar.parse(line) if len(line) <= LONGEST_LINE else _OVERRUN
            self._lines.append((now_s, units))
        self._advance(now_s)
        if len(self._arriving) > 2 * LONGEST_LINE:
            self._arriving = self._arriving[: LONGEST_LINE + 1]

    def next_ready_s(self) -> float | None:
        """Return the instant of the next answer, or at which a waiting command goes on."""
        if self._answers:
            return self._answers[0][0]
        return None if self._wait is None else self._wait.until_s + ANSWERS_IN_S

    def take(self, now_s: float) -> bytes:
        """Return what has been answered by now."""
        self._advance(now_s)
        ready = []
        while self._answers and self._answers[0][0] <= now_s:
            ready.append(self._answers.popleft()[1])
        return b"".join(ready)

    def _advance(self, now_s: float) -> None:
        """Execute what can be executed by now, each command at its own instant."""
        while self._lines:
            at_s = max(self._lines[0][0], self._free_from_s)
            if self._wait is not None:
                at_s = max(at_s, self._wait.until_s)
            if at_s > now_s:
                return
            self._free_from_s = at_s
            self._execute(self._lines[0][1], at_s)
            if self._wait is None:
                self._finish_line(at_s)

    def _execute(self, units: tuple[Unit, ...], at_s: float) -> None:
        """Execute from the present unit on, until the line ends or a command has to wait."""
        self._catch_up(at_s)
        while self._unit_number < len(units):
            unit = units[self._unit_number]
            try:
                result = self._result(unit, at_s)
            except Complaint as complaint:
                self._status.complain(complaint.code)
                result = None
            if isinstance(result, Wait):
                if result.until_s > at_s:
                    self._wait = result
                    return
                self._wait = result
                continue
            self._wait = None
            if result is not None:
                self._fields.append(result)
            self._unit_number += 1

    def _result(self, unit: Unit, at_s: float) -> str | Wait | None:
        if self._wait is not None:
            return self._wait.then(at_s)
        if unit.act is None:
            raise Complaint(unit.complaint)
        if unit.is_query and self._was_identified:
            raise Complaint(-440)
        return unit.act(at_s, *unit.values)

    def _finish_line(self, at_s: float) -> None:
        if self._fields:
            answer = ";".join(self._fields).encode("ascii") + b"\n"
            self._answers.append((at_s + ANSWERS_IN_S, answer))
            self._fields = []
        self._lines.popleft()
        self._unit_number, self._was_identified = 0, False

    def _catch_up(self, at_s: float) -> None:
        self._device.catch_up(at_s)
        if self._is_complete_wanted and self._device.busy_until_s() <= at_s:
            self._status.standard_event |= OPERATION_COMPLETE
            self._is_complete_wanted = False

    def _common(self) -> tuple[Command, ...]:
        """Commands that every instrument has: IEEE 488.2, 10.1 to 10.40."""
        status = self._status
        return (
            Command("*IDN?", self._identify),
            Command("*RST", self._reset),
            Command("*CLS", self._clear),
            Command("*TST?", lambda _: "0"),
            Command("*OPC", self._want_complete),
            Command("*OPC?", lambda _: Wait(self._device.busy_until_s(), lambda _: "1")),
            Command("*WAI", lambda _: Wait(self._device.busy_until_s(), lambda _: None)),
            Command("*ESR?", lambda _: str(status.read_standard_event())),
            Command("*ESE", lambda _, mask: setattr(status, "event_enable", mask), (_BYTE,)),
            Command("*ESE?", lambda _: str(status.event_enable)),
            Command("*SRE", lambda _, mask: setattr(status, "service_enable", mask & ~0x40), (_BYTE,)),
            Command("*SRE?", lambda _: str(status.service_enable)),
            Command("*STB?", lambda _: str(status.byte(has_message=bool(self._fields or self._answers)))),
        )

    def _identify(self, _at_s: float) -> str:
        self._was_identified = True
        return self._identity

    def _reset(self, at_s: float) -> None:
        self._is_complete_wanted = False
        self._device.reset(at_s)

    def _clear(self, _at_s: float) -> None:
        self._is_complete_wanted = False
        self._status.clear()

    def _want_complete(self, at_s: float) -> None:
        self._is_complete_wanted = True
        self._catch_up(at_s)


_OVERRUN = (Unit(None, complaint=-363),)


def _status_commands(status: Status) -> Iterable[Command]:
    """Yield what SCPI-1999 volume 1, 4.2.1 asks of every instrument."""
    for name, register in (("OPERation", status.operation), ("QUEStionable", status.questionable)):
        head = f"STATus:{name}"
        yield Command(f"{head}[:EVENt]?", lambda _, r=register: str(r.read_event()))
        yield Command(f"{head}:CONDition?", lambda _, r=register: str(r.condition))
        yield Command(f"{head}:ENABle", lambda _, mask, r=register: setattr(r, "enable", mask), (_WORD,))
        yield Command(f"{head}:ENABle?", lambda _, r=register: str(r.enable))
    yield Command("STATus:PRESet", lambda _: status.preset())
    yield Command("SYSTem:ERRor[:NEXT]?", lambda _: status.next_error())
    yield Command("SYSTem:ERRor:COUNt?", lambda _: str(len(status.errors)))
    yield Command("SYSTem:VERSion?", lambda _: "1999.0")
