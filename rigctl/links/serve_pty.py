"""A twin behind a pseudo-terminal, as slow as the serial line it stands for.

It owns the terminal and the pace. A pseudo-terminal itself knows no speed: without the pace a rehearsal over it
would promise what no serial line keeps. As there, bytes that nobody takes in time are lost.
"""

import contextlib
import os
import selectors
import tty

from rigctl.errors import DisconnectedError
from rigctl.links.addresses import SerialAddress
from rigctl.links.channel import Twin
from rigctl.timeline import Timeline

_CHUNK_BYTES = 2**12
_MOST_ON_THE_WAY_BYTES = 2**16


class PacedBytes:
    """Bytes on their way at a line's speed, in one direction; what exceeds its bound is lost."""

    def __init__(self, byte_s: float) -> None:
        self._byte_s = byte_s
        self._bytes = bytearray()
        self._begun_s = 0.0

    def put(self, data: bytes, now_s: float) -> None:
        """Send bytes after those that are on their way."""
        if not self._bytes:
            self._begun_s = now_s
        self._bytes += data[: _MOST_ON_THE_WAY_BYTES - len(self._bytes)]

    def next_s(self) -> float | None:
        """When the next byte will have come; None: none is on its way."""
        return self._begun_s + self._byte_s if self._bytes else None

    def take(self, now_s: float) -> bytes:
        """Return what has come by now."""
        count = max(int((now_s - self._begun_s) / self._byte_s), 0) if self._bytes else 0
        taken = bytes(self._bytes[:count])
        del self._bytes[:count]
        self._begun_s += len(taken) * self._byte_s
        return taken


class PtyPort:
    """One twin and its terminal, whose device file anybody may open with any settings."""

    def __init__(
        self, twin: Twin, timeline: Timeline, selector: selectors.BaseSelector, *, line: SerialAddress
    ) -> None:
        self._twin, self._timeline, self._selector = twin, timeline, selector
        self._heard, self._said = PacedBytes(line.byte_s), PacedBytes(line.byte_s)
        # the far end is held open here: else reading ours fails until somebody opens it, and when he closes it
        self._ours, self._theirs = os.openpty()
        tty.setraw(self._theirs)
        os.set_blocking(self._ours, False)
        selector.register(self._ours, selectors.EVENT_READ, self._hear)
        self.address = str(SerialAddress(os.ttyname(self._theirs), line.baud, line.format))

    def ready_in_s(self) -> float | None:
        """How long until a byte has come, or the twin has some to send; None: until somebody writes."""
        instants_s = (self._heard.next_s(), self._said.next_s(), self._twin.next_ready_s())
        next_s = min((instant_s for instant_s in instants_s if instant_s is not None), default=None)
        return None if next_s is None else max(next_s - self._timeline.now(), 0.0)

    def pump(self) -> None:
        """Hand the twin what has come to it, and the terminal what has come from it."""
        now_s = self._timeline.now()
        with contextlib.suppress(DisconnectedError):  # an instrument that goes is silent on a line
            if data := self._heard.take(now_s):
                self._twin.receive(data, now_s)
            ready_s = self._twin.next_ready_s()
            if ready_s is not None and ready_s <= now_s:
                self._said.put(self._twin.take(now_s), now_s)
        if data := self._said.take(now_s):
            with contextlib.suppress(BlockingIOError):
                os.write(self._ours, data)

    def close(self) -> None:
        """Close the terminal; whoever has it open sees it gone."""
        self._selector.unregister(self._ours)
        os.close(self._ours)
        os.close(self._theirs)

    def _hear(self, _events: int) -> None:
        self._heard.put(os.read(self._ours, _CHUNK_BYTES), self._timeline.now())
