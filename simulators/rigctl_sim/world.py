"""The bench world: the light that falls on each detector at each instant.

It owns the source, what turns in the light's way, what stands in it, how warm that is and what blocks it.
Everything is a function of time; it knows no command and no detector.
"""

import math
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field

from rigctl_sim.light_source import Source
from rigctl_sim.plant import Plant
from rigctl_sim.presence import HAND_S, Presence
from rigctl_sim.trajectory import Trajectory

Reader = Callable[[Mapping[str, float], float, Mapping[str, float], frozenset[str]], Sequence[float]]
"""Angles by mount, deg, the power of the source, W, temperatures by role, degC, and the elements that are out of
the beam, to the light at each detector, W."""

STEP_DEG = 1.0
"""Turning light is followed in such steps; a parabola over one misses sin^2 of twice the angle by 1e-6."""


@dataclass(frozen=True, slots=True)
class Mount:
    """What turns an element: its dial, and +1 where the dial counts in the bench's sense, else -1."""

    dial: Trajectory
    sense: float


@dataclass(frozen=True, slots=True)
class Way:
    """What the light meets.

    Parameters
    ----------
    mounts
        By the name that the train's elements give their mount.
    shutters
        Openings between 0 and 1; all stand before everything else in the light's way.
    presence
        What takes elements out of the beam.
    plants
        By the role that keeps an element's temperature.
    """

    mounts: Mapping[str, Mount] = field(default_factory=dict)
    shutters: Sequence[Trajectory] = ()
    presence: Presence = field(default_factory=lambda: Presence({}))
    plants: Mapping[str, Plant] = field(default_factory=dict)


class World:
    """Light as a function of time."""

    def __init__(self, source: Source, reader: Reader, way: Way) -> None:
        self._source, self._reader, self._way = source, reader, way
        self._hand, self._caps = Trajectory(1.0), Trajectory(1.0)
        self._openings = (*way.shutters, self._hand, self._caps)
        self._dials = tuple(mount.dial for mount in way.mounts.values())
        self._moving = self._gathered()
        self._at_rest: tuple[float, Sequence[float]] = (math.nan, ())

    def block_by_hand(self, is_blocked: bool, now_s: float) -> None:
        """Somebody puts a hand into the beam, or takes it away."""
        self._hand.glide(now_s, 0.0 if is_blocked else 1.0, HAND_S)

    def cap_by_hand(self, is_capped: bool, now_s: float) -> None:
        """Somebody puts a cap on every detector, or takes them off."""
        self._caps.glide(now_s, 0.0 if is_capped else 1.0, HAND_S)

    def uncapped(self, instant_s: float) -> float:
        """Part of all light that the caps let pass, stray light included: 0 when they are on."""
        return self._caps(instant_s)

    def take_out_by_hand(self, element: str, is_out: bool, now_s: float) -> None:
        """Somebody takes an element out of the beam, or puts it back."""
        self._way.presence.take_out_by_hand(element, is_out, now_s)
        self._moving = self._gathered()

    def _gathered(self) -> tuple[Trajectory, ...]:
        """Return what changes the light within less than a second."""
        every = (*self._dials, *self._openings, *self._way.presence.moving(), *self._source.emission.moving())
        return tuple(dict.fromkeys(every))

    def rests_from_s(self) -> float:
        """Return the instant from which nothing moves, as far as is known; temperatures are too slow to count."""
        return max([moving.rests_from_s for moving in self._moving])

    def flicker(self, begin_s: float, end_s: float) -> float:
        """Mean of the source's relative noise over a stretch of time."""
        return self._source.noise.mean(begin_s, end_s)

    def light_w(self, instant_s: float, detector: int) -> float:
        """Light on one detector at an instant, W; stray light and noise left out."""
        since = max([moving.rests_from_s for moving in self._moving])
        for plant in self._way.plants.values():
            since = max(since, plant.rests_from_s)
        if instant_s < since:
            return self._parts(instant_s)[detector] * self._source.power_at(instant_s)
        # nothing moves any more: what arrives is worked out once, until something does
        if self._at_rest[0] != since:
            self._at_rest = (since, self._parts(instant_s))
        return self._at_rest[1][detector] * self._source.power_at(instant_s)

    def _parts(self, instant_s: float) -> Sequence[float]:
        """Part of the source's power that arrives at each detector; a beam half on an element is two beams."""
        way = self._way
        angles = {name: mount.sense * mount.dial(instant_s) for name, mount in way.mounts.items()}
        temperatures = {role: plant(instant_s) for role, plant in way.plants.items()}
        opening = math.prod([moving(instant_s) for moving in self._openings])
        beams = way.presence.absent(instant_s)
        if len(beams) == 1:
            (absent,) = beams
            return self._reader(angles, opening, temperatures, absent)
        light = [self._reader(angles, opening * part, temperatures, absent) for absent, part in beams.items()]
        return [sum(parts) for parts in zip(*light, strict=True)]

    def pieces(self, begin_s: float, end_s: float) -> Iterator[tuple[float, float]]:
        """Cut a stretch of time into pieces short enough for a parabola through the light."""
        if begin_s >= self.rests_from_s():
            yield begin_s, end_s
            return
        cuts = {knot for moving in self._moving for knot in moving.knots(begin_s, end_s)}
        here = begin_s
        for cut in [*sorted(cuts), end_s]:
            turned = [abs(dial(cut) - dial(here)) for dial in self._dials]
            count = max(1, math.ceil(max(turned, default=0.0) / STEP_DEG))
            step = (cut - here) / count
            for number in range(count):
                yield here + number * step, here + (number + 1) * step
            here = cut
