"""Waiting for a file descriptor, the same for sockets and serial ports.

It owns the poll on the descriptor and on the stop request's wake pipe, so a request ends a wait at once, and pulses
while it waits; never a select, which fails above 1023 open files.
"""

import select

from rigctl.timeline import PULSE_S, Timeline

READABLE, WRITABLE = select.POLLIN, select.POLLOUT


def wait_ready(fd: int, event: int, deadline_s: float, timeline: Timeline) -> bool:
    """Wait until a descriptor is ready or has failed; False when the deadline passes first.

    Raises `StopRequestedError` when a stop is asked for.
    """
    stop = timeline.stop
    while True:
        stop.check()
        timeline.pulse()
        poller = select.poll()
        poller.register(fd, event)
        if not stop.reasons:  # a request that is held back keeps the pipe readable: polled, it would spin
            poller.register(stop.wake_fd, READABLE)
        left_s = deadline_s - timeline.now()
        if any(ready == fd for ready, _ in poller.poll(min(max(left_s, 0.0), PULSE_S) * 1e3)):
            return True
        if left_s <= 0.0:
            return False
