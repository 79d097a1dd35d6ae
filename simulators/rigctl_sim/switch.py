"""A simulated relay card with shutters behind its channels.

It owns which relays are closed. A shutter moves for a while after its relay has switched.
"""

from collections.abc import Iterable, Mapping
from dataclasses import dataclass

from rigctl_sim.scpi.parameters import channel_list
from rigctl_sim.scpi.status import Status
from rigctl_sim.scpi.syntax import Command
from rigctl_sim.trajectory import Trajectory


@dataclass(frozen=True, slots=True)
class SimulatedShutter:
    """A shutter on a relay; `opening` is 1 when light passes, `opens_at_rest` while the relay is open."""

    opening: Trajectory
    opens_at_rest: bool
    moves_in_s: float

    def follow(self, is_closed: bool, at_s: float) -> None:
        """Move to where a closed or an open relay drives it."""
        target = float(self.opens_at_rest != is_closed)
        if target != self.opening.rests_at:
            self.opening.glide(at_s, target, self.moves_in_s)


class SimulatedSwitch:
    """Relays by their channel, all open after power-on; the shutters by channel."""

    def __init__(self, channels: int, shutters: Mapping[int, SimulatedShutter]) -> None:
        self.status = Status()
        self._channels, self._shutters = channels, dict(shutters)
        self._closed: set[int] = set()

    def commands(self) -> Iterable[Command]:
        """Return its commands: SCPI-1999 volume 2, chapter 17."""
        listed = (channel_list(self._channels),)
        return (
            Command("[ROUTe]:CLOSe", self._close, listed),
            Command("[ROUTe]:CLOSe?", lambda _, channels: self._answer(channels, True), listed),
            Command("[ROUTe]:CLOSe:STATe?", lambda _: f"(@{','.join(map(str, sorted(self._closed)))})"),
            Command("[ROUTe]:OPEN", self._open, listed),
            Command("[ROUTe]:OPEN?", lambda _, channels: self._answer(channels, False), listed),
            Command("[ROUTe]:OPEN:ALL", self.reset),
        )

    def catch_up(self, now_s: float) -> None:
        """Do nothing: relays switch at once."""

    def busy_until_s(self) -> float:
        """Return an instant that is past: nothing takes time here."""
        return 0.0

    def reset(self, now_s: float) -> None:
        """Open all relays."""
        self._open(now_s, tuple(self._closed))

    def _close(self, at_s: float, channels: tuple[int, ...]) -> None:
        self._closed.update(channels)
        self._drive(channels, at_s)

    def _open(self, at_s: float, channels: tuple[int, ...]) -> None:
        self._closed.difference_update(channels)
        self._drive(channels, at_s)

    def _drive(self, channels: tuple[int, ...], at_s: float) -> None:
        for channel in channels:
            if channel in self._shutters:
                self._shutters[channel].follow(channel in self._closed, at_s)

    def _answer(self, channels: tuple[int, ...], is_closed: bool) -> str:
        return ",".join([f"{(channel in self._closed) == is_closed:d}" for channel in channels])
