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
Light = Sequence[float]
"""Power on each detector, W."""
Stretch = tuple[float, Light, Light, Light]
"""A duration, s, and the light at the beginning, middle and end of it."""

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

    _MOST_KEPT = 256

    def __init__(self, source: Source, reader: Reader, way: Way) -> None:
        self._source, self._reader, self._way = source, reader, way
        self._hand, self._caps = Trajectory(1.0), Trajectory(1.0)
        self._openings = tuple(way.shutters)
        self._dials = tuple(mount.dial for mount in way.mounts.values())
        self._moving: tuple[Trajectory, ...] = ()
        self._changing: tuple[Trajectory | Plant, ...] = ()
        self._gather()
        self._at_rest: tuple[float, Sequence[float]] = (math.nan, ())
        self._kept: dict[float, Light] = {}
        self._courses: dict[tuple[float, float], Sequence[Stretch]] = {}

    def block_by_hand(self, is_blocked: bool, now_s: float) -> None:
        """Somebody puts a hand into the beam, or takes it away."""
        self._move_by_hand(self._hand, is_blocked, now_s)

    def cap_by_hand(self, is_capped: bool, now_s: float) -> None:
        """Somebody puts a cap on every detector, or takes them off."""
        self._move_by_hand(self._caps, is_capped, now_s)

    def take_out_by_hand(self, element: str, is_out: bool, now_s: float) -> None:
        """Somebody takes an element out of the beam, or puts it back."""
        self._way.presence.take_out_by_hand(element, is_out, now_s)
        self._gather()

    def uncapped(self, instant_s: float) -> float:
        """Part of all light that the caps let pass, stray light included: 0 when they are on."""
        return self._caps(instant_s)

    def emits(self, instant_s: float) -> bool:
        """Whether the source is on; of one that nobody drives, whether its light is let in."""
        is_let_in = all(opening(instant_s) > 0.0 for opening in self._openings)
        return self._source.emission.is_on(instant_s) and (self._source.emission.is_driven or is_let_in)

    def is_at_rest(self, since_s: float) -> bool:
        """Whether nothing moves from an instant on, as far as is known; temperatures are too slow to count."""
        for moving in self._moving:  # noqa: SIM110  # asked ten times a visit, and all() takes twice as long
            if moving.rests_from_s > since_s:
                return False
        return True

    def flicker(self, begin_s: float, end_s: float) -> float:
        """Mean of the source's relative noise over a stretch of time."""
        return self._source.noise.mean(begin_s, end_s)

    def light_w(self, instant_s: float) -> Light:
        """Light on each detector at an instant of the past, W; stray light and noise left out."""
        light = self._kept.get(instant_s)
        if light is None:
            # the past does not change, and other detectors will ask for the same instant
            if len(self._kept) >= self._MOST_KEPT:
                self._kept.clear()
            power_w = self._source.power_at(instant_s)
            light = self._kept[instant_s] = [part * power_w for part in self._parts_at(instant_s)]
        return light

    def course(self, begin_s: float, end_s: float) -> Sequence[Stretch]:
        """Light over a stretch of the past, in pieces short enough for a parabola through each."""
        key = (begin_s, end_s)
        course = self._courses.get(key)
        if course is None:
            if len(self._courses) >= self._MOST_KEPT:
                self._courses.clear()
            course = self._courses[key] = list(self._stretches(begin_s, end_s))
        return course

    def _stretches(self, begin_s: float, end_s: float) -> Iterator[Stretch]:
        end = self.light_w(begin_s)
        for here, there in self.pieces(begin_s, end_s):
            begin, end = end, self.light_w(there)
            yield there - here, begin, self.light_w(0.5 * (here + there)), end

    def _move_by_hand(self, hand: Trajectory, is_in_the_way: bool, now_s: float) -> None:
        hand.glide(now_s, 0.0 if is_in_the_way else 1.0, HAND_S)
        if hand not in self._openings:
            self._openings += (hand,)
            self._gather()

    def _gather(self) -> None:
        """Find what changes the light within less than a second, and what takes longer."""
        every = (*self._dials, *self._openings, *self._way.presence.moving(), *self._source.emission.moving())
        self._moving = tuple(dict.fromkeys(every))
        self._changing = (*self._moving, *self._way.plants.values())

    def _parts_at(self, instant_s: float) -> Sequence[float]:
        """Part of the source's power that arrives at each detector, worked out once while nothing changes."""
        since = -math.inf
        for changing in self._changing:
            rests_from_s = changing.rests_from_s
            if instant_s < rests_from_s:
                return self._parts(instant_s)
            since = max(since, rests_from_s)
        if self._at_rest[0] != since:
            self._at_rest = (since, self._parts(instant_s))
        return self._at_rest[1]

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
        if self.is_at_rest(begin_s):
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
