"""A simulated relay card with shutters and slides behind its channels.

It owns which relays are closed. What a relay drives moves for a while after the relay has switched.
"""

from collections.abc import Iterable, Mapping
from dataclasses import dataclass

from rigctl_sim.scpi.parameters import channel_list
from rigctl_sim.scpi.status import Status
from rigctl_sim.scpi.syntax import Command
from rigctl_sim.trajectory import Trajectory


@dataclass(frozen=True, slots=True)
class Mover:
    """What a relay drives between two places, 0 and 1.

    Parameters
    ----------
    place
        Of a shutter 1 when light passes, of a slide 1 when its element is in the beam.
    rests_at_one
        Where it is while the relay is open.
    """

    place: Trajectory
    rests_at_one: bool
    moves_in_s: float

    def follow(self, is_closed: bool, at_s: float) -> None:
        """Move to where a closed or an open relay drives it."""
        target = float(self.rests_at_one != is_closed)
        if target != self.place.rests_at:
            self.place.glide(at_s, target, self.moves_in_s)


class SimulatedSwitch:
    """Relays by their channel, all open after power-on; what they drive by channel, if it moves."""

    def __init__(self, channels: int, movers: Mapping[int, Mover], *, status: Status | None = None) -> None:
        self.status = status or Status()
        self._channels, self._movers = channels, dict(movers)
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
            if channel in self._movers:
                self._movers[channel].follow(channel in self._closed, at_s)

    def _answer(self, channels: tuple[int, ...], is_closed: bool) -> str:
        return ",".join([f"{(channel in self._closed) == is_closed:d}" for channel in channels])
