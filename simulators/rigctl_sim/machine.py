"""The mechanics behind motion firmware: axes, the queue of planned moves, feed hold and homing.

It owns where every axis is and what it counts; it knows no letter of the wire beyond the axes' names.
"""

import math
from collections import deque
from collections.abc import Iterable, Mapping
from dataclasses import dataclass

from rigctl_sim.trajectory import Trajectory

MOST_PLANNED = 15
"""Moves that small motion firmware plans ahead; common practice."""
LOCATES_IN_S = 1.0
"""Pull off the switch and come back slowly; common practice."""
_SEEK = 0.5
"""Part of the top speed at which the switch is sought; common practice."""


@dataclass(frozen=True, slots=True)
class AxisMake:
    """How an axis is built; its travel is that of its dial."""

    travel_deg: tuple[float, float]
    speed_deg_per_s: float
    acceleration_deg_per_s2: float
    resolution_deg: float


class Axis:
    """One axis; its counter shows 0 when it is switched on, wherever it stands.

    Parameters
    ----------
    left_at_deg
        Where it stands then, on its dial, whose 0 is at the home switch.
    """

    def __init__(self, make: AxisMake, *, left_at_deg: float = 0.0) -> None:
        self.make = make
        self.dial = Trajectory(left_at_deg)
        self.lost_deg = -left_at_deg
        """What the counter shows beyond the dial, deg: not homed yet, or steps lost by an abrupt stop."""

    def counted_deg(self, instant_s: float) -> float:
        """What the counter shows at an instant, deg."""
        return self.dial(instant_s) + self.lost_deg

    def move(self, start_s: float, target_deg: float, speed_deg_per_s: float) -> float:
        """Go to a counted angle, rounded to a step; return the instant at which it is there."""
        step = self.make.resolution_deg
        target = round(target_deg / step) * step - self.lost_deg
        return self.dial.move(start_s, target, speed=speed_deg_per_s, acceleration=self.make.acceleration_deg_per_s2)

    def hold(self, now_s: float) -> float:
        """Slow down; return the instant of rest."""
        return self.dial.hold(now_s, acceleration=self.make.acceleration_deg_per_s2)

    def lose_step(self, now_s: float) -> None:
        """Stop counting at once while the mount coasts on."""
        counted = self.counted_deg(now_s)
        self.hold(now_s)
        self.lost_deg = counted - self.dial.rests_at

    def home(self, now_s: float) -> float:
        """Seek the switch and count from there; return the instant at which the axis is homed."""
        self.lost_deg = 0.0
        starts_s = max(now_s, self.dial.rests_from_s)
        make = self.make
        there_s = self.dial.move(
            starts_s, 0.0, speed=_SEEK * make.speed_deg_per_s, acceleration=make.acceleration_deg_per_s2
        )
        return there_s + LOCATES_IN_S


@dataclass(frozen=True, slots=True)
class Planned:
    """A move in the queue: counted targets in deg, and when it ends (never while held)."""

    targets: Mapping[str, float]
    speed_deg_per_s: float
    ends_s: float


class Machine:
    """Axes that share one queue; the axes of one move start together, and it ends with the slowest."""

    def __init__(self, axes: Mapping[str, Axis]) -> None:
        self.axes = dict(axes)
        self.is_held = False
        self._queue: deque[Planned] = deque()
        self._targets = dict.fromkeys(self.axes, 0.0)

    def rests_from_s(self) -> float:
        """Return the instant from which nothing turns, as far as is planned."""
        return max(axis.dial.rests_from_s for axis in self.axes.values())

    def is_turning(self, now_s: float) -> bool:
        """Whether anything turns."""
        return self.rests_from_s() > now_s

    def done_from_s(self) -> float:
        """Return the instant from which every planned move is done; never, while they are held."""
        return math.inf if self.is_held and self._queue else self.rests_from_s()

    def room_from_s(self, now_s: float) -> float:
        """Return the instant from which another move can be planned."""
        self._forget_done(now_s)
        return now_s if len(self._queue) < MOST_PLANNED else self._queue[0].ends_s

    def room(self, now_s: float) -> int:
        """Return how many moves can still be planned."""
        self._forget_done(now_s)
        return MOST_PLANNED - len(self._queue)

    def target_deg(self, letter: str) -> float:
        """Where an axis will stand after all that is planned, deg of its counter."""
        return self._targets[letter]

    def is_within_travel(self, targets: Mapping[str, float]) -> bool:
        """Whether counted targets lie within what the axes can reach."""
        spans = {letter: self.axes[letter].make.travel_deg for letter in targets}
        return all(spans[letter][0] <= target <= spans[letter][1] for letter, target in targets.items())

    def plan(self, now_s: float, targets: Mapping[str, float], speed_deg_per_s: float) -> None:
        """Add a move to the queue."""
        self._targets.update(targets)
        if self.is_held:
            self._queue.append(Planned(targets, speed_deg_per_s, math.inf))
        else:
            self._start(max(now_s, self.rests_from_s()), targets, speed_deg_per_s)

    def hold(self, now_s: float) -> None:
        """Slow down and keep what was planned."""
        if self.is_held:
            return
        self._forget_done(now_s)
        self.is_held = True
        for axis in self.axes.values():
            axis.hold(now_s)
        self._queue = deque(Planned(move.targets, move.speed_deg_per_s, math.inf) for move in self._queue)

    def resume(self, now_s: float) -> None:
        """Go on with what was planned."""
        if not self.is_held:
            return
        self.is_held = False
        waiting, self._queue = self._queue, deque()
        for move in waiting:
            self._start(max(now_s, self.rests_from_s()), move.targets, move.speed_deg_per_s)

    def abandon(self, now_s: float) -> bool:
        """Forget what was planned; return whether the place was lost because something turned."""
        is_lost = self.is_turning(now_s)
        if is_lost:
            for axis in self.axes.values():
                axis.lose_step(now_s)
        self.is_held = False
        self._queue.clear()
        self._targets = {letter: axis.dial.rests_at + axis.lost_deg for letter, axis in self.axes.items()}
        return is_lost

    def home(self, now_s: float) -> float:
        """Home all axes together; return the instant at which they are."""
        self._targets = dict.fromkeys(self.axes, 0.0)
        return max(axis.home(now_s) for axis in self.axes.values())

    def _start(self, start_s: float, targets: Mapping[str, float], speed_deg_per_s: float) -> None:
        ends_s = max(self._moves(start_s, targets, speed_deg_per_s))
        self._queue.append(Planned(targets, speed_deg_per_s, ends_s))

    def _moves(self, start_s: float, targets: Mapping[str, float], speed: float) -> Iterable[float]:
        for letter, target in targets.items():
            axis = self.axes[letter]
            yield axis.move(start_s, target, min(speed, axis.make.speed_deg_per_s))

    def _forget_done(self, now_s: float) -> None:
        while self._queue and self._queue[0].ends_s <= now_s:
            self._queue.popleft()
