"""Bytes to and from a twin in the same process, in virtual time.

It owns the line between the two, and moves the timeline to the instant at which a reply becomes readable. It
never works a reply out itself, and never reads ahead of the present.
"""

from rigctl.links.channel import Twin
from rigctl.links.inbox import Inbox
from rigctl.timeline import Timeline


class LoopbackChannel:
    """A line to a twin. As on a real one, a reply that comes after its deadline stays on the line."""

    def __init__(self, address: str, twin: Twin, timeline: Timeline) -> None:
        self.address = address
        self._twin, self._timeline = twin, timeline
        self._inbox = Inbox(address)

    def write(self, data: bytes, deadline_s: float) -> None:  # noqa: ARG002 - a twin takes bytes at once
        """Send all bytes."""
        self._timeline.stop.check()
        self._twin.receive(data, self._timeline.now())

    def readline(self, deadline_s: float) -> bytes:
        """Return bytes up to and including the next LF."""
        while (line := self._inbox.take_line()) is None:
            self._receive(deadline_s)
        return line

    def read_exact(self, count: int, deadline_s: float) -> bytes:
        """Return exactly `count` bytes."""
        while (piece := self._inbox.take_exact(count)) is None:
            self._receive(deadline_s)
        return piece

    def discard(self) -> bytes:
        """Take away what has arrived unread, without waiting, and return it."""
        self._inbox.add(self._twin.take(self._timeline.now()))
        return self._inbox.take_all()

    def close(self) -> None:
        """Forget what has arrived unread; the twin lives on."""
        self._inbox.take_all()

    def _receive(self, deadline_s: float) -> None:
        """Let time pass until the twin's next bytes, or until the deadline."""
        ready_s = self._twin.next_ready_s()
        if ready_s is None or ready_s > deadline_s:
            self._timeline.wait_until(deadline_s)
            raise self._inbox.late()
        self._timeline.wait_until(ready_s)
        self._inbox.add(self._twin.take(self._timeline.now()))
