"""How an SCPI instrument is brought back into step.

It owns the resync of the family and nothing of an instrument. Only common commands that every IEEE 488.2
instrument has are used, and the error queue.
"""

import zlib
from dataclasses import dataclass
from struct import pack

from rigctl.errors import LinkTimeoutError
from rigctl.links.channel import Channel
from rigctl.links.family import Opening, Resynced
from rigctl_drivers.scpi_codec import ERROR_QUERY, no_reply, parse_complaint, parse_text

MOST_STALE_LINES = 10_000
"""An instrument that sends more than this unasked never answers."""
MOST_COMPLAINTS = 50
"""Longer than the error queues of instruments, so that one which never empties cannot hold a run."""

EMPTY_LINE = -102
"""What a parser that knows no empty message calls one, though IEEE 488.2-1992 allows it; met in practice."""

READY_AT_ONCE = Opening()
"""An instrument that is on stays on when its line is opened."""


@dataclass(frozen=True, slots=True)
class ScpiFamily:
    """Line framing with LF, and a resync by two numbers that nobody else can have written.

    A late or torn reply can look like any answer, so the instrument is made to say two numbers drawn for this
    moment, one right after the other; what came before is stale. They pass through the event status enable
    register, which goes back to 0, its value at power-on. Each is read before the next is asked for: on a bus that
    knows where messages end, a question that comes before its forerunner's answer was read interrupts that answer.
    """

    name: str = "SCPI"
    reply_timeout_s: float = 2.0
    longest_s: float = 10.0
    opening: Opening = READY_AT_ONCE

    def resync(self, channel: Channel, deadline_s: float) -> Resynced:
        """Bring the instrument into step; `complaints` is its error queue, which is empty afterwards.

        Source
        ------
        IEEE 488.2-1992, 10.10 `*ESE` and 10.11 `*ESE?`; from memory. The procedure was measured against late,
        torn and unread replies and half-sent commands.
        """
        first, second = nonces(deadline_s)
        channel.discard()
        lines: list[bytes] = []
        # the leading LF ends a command that was sent in part
        channel.write(f"\n*ESE {first};*ESE?\n".encode(), deadline_s)
        _read_up_to(channel, (first,), lines, deadline_s)
        channel.write(f"*ESE {second};*ESE?\n".encode(), deadline_s)
        _read_up_to(channel, (first, second), lines, deadline_s)
        channel.write(b"*ESE 0\n", deadline_s)
        return Resynced(tuple(lines[:-2]), _drain(channel, deadline_s))


SCPI = ScpiFamily()


def nonces(deadline_s: float) -> tuple[int, int]:
    """Draw two different numbers in 1..255 from the digits of an instant, which no earlier resync shares."""
    seed = zlib.crc32(pack("<d", deadline_s))
    first, step = 1 + seed % 255, 1 + (seed >> 8) % 254
    return first, 1 + (first - 1 + step) % 255


def _read_up_to(channel: Channel, wanted: tuple[int, ...], lines: list[bytes], deadline_s: float) -> None:
    """Read lines until the numbers stand at their end, one after the other."""
    try:
        while tuple(map(_number, lines[-len(wanted) :])) != wanted:
            if len(lines) >= MOST_STALE_LINES:
                raise no_reply("lines without end", lines[-1], address=channel.address)
            lines.append(channel.readline(deadline_s))
    except LinkTimeoutError as late:
        raise LinkTimeoutError(
            "no answer to anything, not even to *ESE?",
            address=channel.address,
            partial=b"".join(lines) + late.partial,
            do="look at the instrument: is it on, in remote mode, and the one the rig file names?",
        ) from late


def _number(line: bytes) -> int:
    """Return a line as a number; -1 is none."""
    return int(line) if line.strip().isdigit() and len(line) < 8 else -1


def _drain(channel: Channel, deadline_s: float) -> tuple[tuple[int, str], ...]:
    """Empty the error queue; what the resync itself causes is left out.

    That is query errors (-400 to -499), and the syntax error that the LF at its start is to some parsers.
    """
    complaints: list[tuple[int, str]] = []
    for _ in range(MOST_COMPLAINTS):
        channel.write(f"{ERROR_QUERY}\n".encode(), deadline_s)
        line = channel.readline(deadline_s).rstrip(b"\r\n")
        entry = parse_complaint(parse_text(line, address=channel.address), address=channel.address)
        if entry.code == 0:
            break
        if entry.code != EMPTY_LINE and not -499 <= entry.code <= -400:
            complaints.append((entry.code, entry.text))
    return tuple(complaints)
