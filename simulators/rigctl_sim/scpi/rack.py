"""Several devices behind one wire, as the channels of one instrument.

It owns that they share one status; what each of them does is its own.
"""

from collections.abc import Iterable, Sequence

from rigctl_sim.scpi.status import Status
from rigctl_sim.scpi.syntax import Command
from rigctl_sim.scpi.twin import Device


class Rack:
    """Devices that were made with the same status; their channels must differ."""

    def __init__(self, devices: Sequence[Device], status: Status) -> None:
        self.status = status
        self._devices = tuple(devices)

    def commands(self) -> Iterable[Command]:
        """Return the commands of all of them."""
        return (command for device in self._devices for command in device.commands())

    def catch_up(self, now_s: float) -> None:
        """Let each finish what has ended by now."""
        for device in self._devices:
            device.catch_up(now_s)

    def busy_until_s(self) -> float:
        """Return the instant at which the last of them has ended what is under way."""
        return max(device.busy_until_s() for device in self._devices)

    def reset(self, now_s: float) -> None:
        """Do to each what `*RST` does to it."""
        for device in self._devices:
            device.reset(now_s)
