"""How a G-code controller is brought back into step.

It owns the resync of the family. Acknowledgements carry no number: what they answer is known only by
counting, so the count is made to start anew.
"""

from collections.abc import Callable
from dataclasses import dataclass

from rigctl.errors import FramingError, LinkTimeoutError
from rigctl.links.channel import Channel
from rigctl.links.family import Opening, Resynced
from rigctl_drivers.gcode_codec import CLEAR, REPORT, Ack, Alarm, Line, Note, Report, parse_line
from rigctl_drivers.gcode_meanings import alarm_words, error_words

MOST_STALE_LINES = 10_000
"""A controller that sends more than this unasked never answers."""
STALE_ALARM = "ALARM"
"""Begins the text of a complaint that is an alarm rather than the refusal of a line."""

BOARD = Opening(asserts_dtr=False, quiet_s=2.0)
"""Boards of this kind restart when DTR is raised, some whatever is done about it, and greet within two seconds;
common practice."""


@dataclass(frozen=True, slots=True)
class GcodeFamily:
    """Lines that end with LF, each acknowledged once; reports and messages come in between."""

    name: str = "G-code"
    reply_timeout_s: float = 2.0
    longest_s: float = 10.0
    opening: Opening = BOARD

    def resync(self, channel: Channel, deadline_s: float) -> Resynced:
        """Find the step by a report, an empty line and its `ok`, and a report with nothing before it.

        The empty line also clears an error that refuses every further line. `complaints` are the refusals
        and alarms among the stale lines. A controller that is searching its zero takes no line until that
        ends, so `LinkTimeoutError` is raised at once then.
        """
        stale: list[bytes] = []
        try:
            _, first = _next(channel, deadline_s, ask=REPORT, is_wanted=_is_report, stale=stale)
            if isinstance(first, Report) and first.state == "Home":
                raise LinkTimeoutError(
                    "it is searching its zero and takes no line until that ends", address=channel.address
                )
            _clear(channel, deadline_s, stale)
            before = -1
            while before != len(stale):
                before = len(stale)
                _next(channel, deadline_s, ask=REPORT, is_wanted=_is_report, stale=stale)
        except LinkTimeoutError as late:
            raise _silent(channel, [*stale, late.partial], late.what) from late
        return Resynced(tuple(stale), _complaints(stale, channel.address))


GCODE = GcodeFamily()


def _is_report(line: Line) -> bool:
    return isinstance(line, Report)


def _is_ack(line: Line) -> bool:
    return isinstance(line, Ack)


def _clear(channel: Channel, deadline_s: float, stale: list[bytes]) -> None:
    """Send empty lines until one gives `ok`; the first may end a line that was sent in part."""
    while True:
        raw, answer = _next(channel, deadline_s, ask=CLEAR, is_wanted=_is_ack, stale=stale)
        if answer == Ack():
            return
        stale.append(raw)


def _next(
    channel: Channel, deadline_s: float, *, ask: bytes, is_wanted: Callable[[Line], bool], stale: list[bytes]
) -> tuple[bytes, Line]:
    """Ask, and read up to what is wanted; lines before it are stale. Returns it as it came and as read."""
    channel.write(ask, deadline_s)
    while len(stale) < MOST_STALE_LINES:
        raw = channel.readline(deadline_s)
        line = _line(raw, channel.address)
        if is_wanted(line):
            return raw, line
        stale.append(raw)
    raise FramingError(
        "the controller sends lines without end",
        address=channel.address,
        partial=stale[-1],
        do="check that the driver fits this controller",
    )


def _line(raw: bytes, address: str) -> Line:
    """Read a line; torn ones are expected here."""
    try:
        return parse_line(raw.rstrip(b"\r\n"), address=address)
    except FramingError:
        return Note(repr(raw))


def _complaints(stale: list[bytes], address: str) -> tuple[tuple[int, str], ...]:
    complaints = []
    for line in (_line(raw, address) for raw in stale):
        if isinstance(line, Alarm):
            complaints.append((line.code, f"{STALE_ALARM}: {alarm_words(line.code)}"))
        elif isinstance(line, Ack) and line.error is not None:
            complaints.append((line.error, error_words(line.error)))
    return tuple(complaints)


def _silent(channel: Channel, stale: list[bytes], what: str) -> LinkTimeoutError:
    return LinkTimeoutError(
        f"the controller does not come into step: {what}",
        address=channel.address,
        partial=b"".join(stale),
        do="look at the mount; if it stands still, reset its controller and home it",
    )
