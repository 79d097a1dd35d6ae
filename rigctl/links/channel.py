"""What carries bytes to one address, and what answers them in a rehearsal.

It owns the two contracts; the channels themselves are `tcp` and `loopback`. A channel knows no command and
no unit. Deadlines are instants of the timeline, never durations, so that a reply which comes in drops cannot
stretch them.
"""

from typing import Protocol


class Channel(Protocol):
    """Bytes to and from one address.

    Every method raises `LinkTimeoutError` (with the partial bytes) at its deadline, `DisconnectedError` when
    the other side is gone, and `StopRequestedError` when a stop is asked for while it waits.
    """

    address: str

    def write(self, data: bytes, deadline_s: float) -> None:
        """Send all bytes."""

    def readline(self, deadline_s: float) -> bytes:
        """Return bytes up to and including the next LF."""

    def read_exact(self, count: int, deadline_s: float) -> bytes:
        """Return exactly `count` bytes."""

    def discard(self) -> bytes:
        """Take away what has arrived unread, without waiting, and return it."""

    def close(self) -> None:
        """Give the address back; a second call does nothing."""


class Twin(Protocol):
    """A simulated instrument at the far end of a wire, as a function of time.

    Instants only grow from call to call. A reply is worked out when it is taken, from histories, not when it
    was asked for.
    """

    def receive(self, data: bytes, now_s: float) -> None:
        """Bytes arrive at the instrument."""

    def next_ready_s(self) -> float | None:
        """Return the instant at which the next reply bytes become readable; None: nothing is under way."""

    def take(self, now_s: float) -> bytes:
        """Return the reply bytes readable by now, in order."""
