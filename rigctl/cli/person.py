"""The person at the terminal, who blocks the beam by hand."""

import select
import sys

from rigctl.cli.console import complain
from rigctl.timeline import StopRequest


class PersonAtTerminal:
    """Asks on the terminal and waits for Enter; a stop request ends the waiting."""

    is_there = True

    def __init__(self, stop: StopRequest) -> None:
        self._stop = stop

    def block_beam(self) -> None:
        """Ask for the block."""
        self._ask("Block the beam right behind the source with something opaque, then press Enter.")

    def clear_beam(self) -> None:
        """Ask for it to be taken away."""
        self._ask("Take the block out of the beam, then press Enter.")

    def cap_detectors(self) -> None:
        """Ask for the caps."""
        self._ask("Put a cap on every detector, then press Enter.")

    def uncap_detectors(self) -> None:
        """Ask for them to be taken off."""
        self._ask("Take the caps off the detectors, then press Enter.")

    def take_out(self, element: str) -> None:
        """Ask for an element to be taken out."""
        self._ask(f"Take '{element}' out of the beam, then press Enter.")

    def put_in(self, element: str) -> None:
        """Ask for it to be put back."""
        self._ask(f"Put '{element}' back into the beam as it was, then press Enter.")

    def _ask(self, text: str) -> None:
        complain(f"\a\n{text}")
        poller = select.poll()
        poller.register(sys.stdin, select.POLLIN)
        poller.register(self._stop.wake_fd, select.POLLIN)
        ready = [fd for fd, _ in poller.poll()]
        self._stop.check()
        if sys.stdin.fileno() in ready:
            sys.stdin.readline()


def is_somebody_there() -> bool:
    """Whether a person can be asked: both ends are a terminal."""
    return sys.stdin.isatty() and sys.stderr.isatty()
