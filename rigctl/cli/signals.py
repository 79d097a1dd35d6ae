"""Turns the signals that end a program into a stop request, so that the bench is made safe first."""

import signal
from collections.abc import Iterator
from contextlib import contextmanager
from types import FrameType

from rigctl.timeline import StopRequest

ENDING = (signal.SIGINT, signal.SIGTERM, signal.SIGHUP)


@contextmanager
def stopping_on_signals(stop: StopRequest) -> Iterator[None]:
    """Within: SIGINT, SIGTERM and SIGHUP ask to stop; a second one skips waits, never the off commands.

    A SIGHUP that is ignored stays so: `nohup` means that a closed terminal shall not end the run.
    """

    def ask(number: int, _frame: FrameType | None) -> None:
        stop.request(signal.Signals(number).name)

    has_nohup = signal.getsignal(signal.SIGHUP) is signal.SIG_IGN
    heard = [number for number in ENDING if not (has_nohup and number == signal.SIGHUP)]
    before = {number: signal.signal(number, ask) for number in heard}
    try:
        yield
    finally:
        for number, handler in before.items():
            signal.signal(number, handler)
