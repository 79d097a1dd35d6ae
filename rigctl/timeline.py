"""The one place where time passes.

It owns the clock, waiting and the stop request; nothing else in the project sleeps or reads a clock.
Instants are seconds since the run began. On hardware they follow the wall clock; in a rehearsal time is
virtual and moves only when somebody waits for it.
"""

import math
import os
import select
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager, suppress
from datetime import UTC, datetime, timedelta
from typing import Protocol

from rigctl.errors import StopRequestedError

PULSE_S = 0.5
"""No wait is longer than this without a pulse."""


class StopRequest:
    """A wish to stop, set by a signal handler and seen by every wait.

    The first request ends the work under way; while `masked` (the bench is being made safe) it is not raised,
    and from the second request on masked waits are skipped.
    """

    def __init__(self) -> None:
        self.reasons: list[str] = []
        self._masked = 0
        self.wake_fd, self._wake_write = os.pipe()
        os.set_blocking(self._wake_write, False)

    def request(self, reason: str) -> None:
        """Ask to stop; may be called from a signal handler."""
        self.reasons.append(reason)
        with suppress(BlockingIOError):  # a full pipe wakes every poll already
            os.write(self._wake_write, b"!")

    def check(self) -> None:
        """Raise `StopRequestedError` when a stop was asked for and is not masked."""
        if self.reasons and not self._masked:
            raise StopRequestedError(self.reasons[0])

    @property
    def is_hurried(self) -> bool:
        """Whether masked waits are to be skipped: asked more than once."""
        return len(self.reasons) > 1

    @contextmanager
    def masked(self) -> Iterator[None]:
        """Hold the request back while the bench is made safe."""
        self._masked += 1
        try:
            yield
        finally:
            self._masked -= 1

    def close(self) -> None:
        """Give the wake pipe back."""
        os.close(self.wake_fd)
        os.close(self._wake_write)


class Timeline(Protocol):
    """Where time passes; instants are seconds since `start`."""

    start: datetime
    stop: StopRequest

    @property
    def is_virtual(self) -> bool:
        """Whether time moves only when waited for."""

    def now(self) -> float:
        """Return the present instant, s."""

    def wait_until(self, instant_s: float) -> None:
        """Let time pass until an instant; raises `StopRequestedError` when a stop is asked for."""

    def pulse(self) -> None:
        """Tell whoever watches that the program lives; called at least every `PULSE_S` while anything waits."""


def wall_time(timeline: Timeline, instant_s: float) -> datetime:
    """Date and time of an instant, with its offset from UTC."""
    return timeline.start + timedelta(seconds=instant_s)


class WallTimeline:
    """Time of the wall clock, counted by the monotonic clock from the moment of construction."""

    is_virtual = False

    def __init__(self, stop: StopRequest | None = None) -> None:
        self.stop = stop or StopRequest()
        self.start = datetime.now(UTC)
        self.on_pulse: Callable[[], None] = lambda: None
        self._origin = time.monotonic()

    def now(self) -> float:
        """Return seconds since construction."""
        return time.monotonic() - self._origin

    def wait_until(self, instant_s: float) -> None:
        """Sleep until an instant; a stop request wakes it."""
        self.stop.check()
        poller = select.poll()
        poller.register(self.stop.wake_fd, select.POLLIN)
        while (left := min(instant_s - self.now(), PULSE_S)) > 0:
            self.pulse()
            if self.stop.is_hurried:
                return
            # poll counts whole milliseconds: the rest is slept, so that a wait ends on time
            whole_ms = math.floor(left * 1e3)
            if self.stop.reasons or whole_ms < 2:
                time.sleep(min(left, 2e-3))
            else:
                poller.poll(whole_ms - 1)
            self.stop.check()

    def pulse(self) -> None:
        """Call `on_pulse`, such as a watchdog's heartbeat."""
        self.on_pulse()


class VirtualTimeline:
    """Time of a rehearsal: it stands still until somebody waits."""

    is_virtual = True

    def __init__(self, start: datetime, stop: StopRequest | None = None) -> None:
        self.stop = stop or StopRequest()
        self.start = start
        self._now = 0.0

    def now(self) -> float:
        """Return the virtual instant, s."""
        return self._now

    def wait_until(self, instant_s: float) -> None:
        """Move time forward to an instant at once."""
        self.stop.check()
        self._now = max(self._now, instant_s)

    def pulse(self) -> None:
        """Do nothing: nobody watches a rehearsal."""
