"""The bench world: the light that falls on each detector at each instant.

It owns the source, what turns in the light's way and what blocks it. Everything is a function of time; it
knows no command, no noise and no detector.
"""

import math
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass

from rigctl_sim.trajectory import Trajectory

Reader = Callable[[Mapping[str, float], float], Sequence[float]]
"""Angles by mount, deg, and the power of the source, W, to the light at each detector, W."""

STEP_DEG = 1.0
"""Turning light is followed in such steps; a parabola over one misses sin^2 of twice the angle by 1e-6."""
_HOUR_S = 3600.0
_HAND_S = 0.1


@dataclass(frozen=True, slots=True)
class Source:
    """A steady source whose power drifts at a constant rate; `power_w` is that at instant 0."""

    power_w: float
    drift_per_h: float

    def power_at(self, instant_s: float) -> float:
        """Power at an instant, W."""
        return self.power_w * (1.0 + self.drift_per_h * instant_s / _HOUR_S)


@dataclass(frozen=True, slots=True)
class Mount:
    """What turns an element: its dial, and +1 where the dial counts in the bench's sense, else -1."""

    dial: Trajectory
    sense: float


class World:
    """Light as a function of time.

    Parameters
    ----------
    mounts
        By the name that the train's elements give their mount.
    shutters
        Openings between 0 and 1; all stand before everything else in the light's way.
    """

    def __init__(
        self, source: Source, reader: Reader, *, mounts: Mapping[str, Mount], shutters: Sequence[Trajectory]
    ) -> None:
        self._source, self._reader, self._mounts = source, reader, dict(mounts)
        self._hand = Trajectory(1.0)
        self._openings = (*shutters, self._hand)
        self._moving = (*(mount.dial for mount in self._mounts.values()), *self._openings)
        self._at_rest: tuple[float, Sequence[float]] = (math.nan, ())

    def block_by_hand(self, is_blocked: bool, now_s: float) -> None:
        """Somebody puts a hand into the beam, or takes it away."""
        self._hand.glide(now_s, 0.0 if is_blocked else 1.0, _HAND_S)

    def rests_from_s(self) -> float:
        """Return the instant from which nothing moves, as far as is known."""
        return max([moving.rests_from_s for moving in self._moving])

    def light_w(self, instant_s: float, detector: int) -> float:
        """Light on one detector at an instant, W, stray light left out."""
        since = self.rests_from_s()
        if instant_s < since:
            return self._parts(instant_s)[detector] * self._source.power_at(instant_s)
        # nothing moves any more: what arrives is worked out once, until something does
        if self._at_rest[0] != since:
            self._at_rest = (since, self._parts(instant_s))
        return self._at_rest[1][detector] * self._source.power_at(instant_s)

    def _parts(self, instant_s: float) -> Sequence[float]:
        """Part of the source's power that arrives at each detector."""
        angles = {name: mount.sense * mount.dial(instant_s) for name, mount in self._mounts.items()}
        return self._reader(angles, math.prod([opening(instant_s) for opening in self._openings]))

    def pieces(self, begin_s: float, end_s: float) -> Iterator[tuple[float, float]]:
        """Cut a stretch of time into pieces short enough for a parabola through the light."""
        if begin_s >= self.rests_from_s():
            yield begin_s, end_s
            return
        cuts = {knot for moving in self._moving for knot in moving.knots(begin_s, end_s)}
        here = begin_s
        for cut in [*sorted(cuts), end_s]:
            turned = [abs(mount.dial(cut) - mount.dial(here)) for mount in self._mounts.values()]
            count = max(1, math.ceil(max(turned, default=0.0) / STEP_DEG))
            step = (cut - here) / count
            for number in range(count):
                yield here + number * step, here + (number + 1) * step
            here = cut
