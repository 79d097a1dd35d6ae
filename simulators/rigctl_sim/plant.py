"""A temperature as a function of time: what a controller drives, or leaves alone.

It owns the history and the future of one temperature, in closed form. It knows no command and no sensor.
"""

import math
from bisect import bisect_right
from dataclasses import dataclass

SETTLED = 25.0
"""After so many time constants a gap has left exp(-25) = 1e-11 of itself."""


@dataclass(frozen=True, slots=True)
class PlantMake:
    """How a plant behaves.

    Parameters
    ----------
    ambient_c
        Where it begins, and where it goes when nobody drives it.
    time_constant_s
        With which a regulated temperature closes on its goal.
    slew_k_per_s
        How fast it can go at most.
    idle_time_constant_s
        With which it goes back to ambient.
    """

    ambient_c: float
    time_constant_s: float
    slew_k_per_s: float
    idle_time_constant_s: float


@dataclass(frozen=True, slots=True)
class Stretch:
    """From `start_s` on: a straight line, or, with a time constant, an exponential towards `goal_c`."""

    start_s: float
    begin_c: float
    goal_c: float
    rate_k_per_s: float = 0.0
    time_constant_s: float = 0.0

    def temperature_c(self, instant_s: float) -> float:
        """Temperature at an instant of this stretch."""
        elapsed_s = instant_s - self.start_s
        if self.time_constant_s > 0.0:
            return self.goal_c + (self.begin_c - self.goal_c) * math.exp(-elapsed_s / self.time_constant_s)
        return self.begin_c + self.rate_k_per_s * elapsed_s


class Plant:
    """One temperature; it always ends at rest.

    Parameters
    ----------
    fails_at_s
        Instant from which nothing drives it any more, whatever its controller is told.
    """

    def __init__(self, make: PlantMake, *, fails_at_s: float = math.inf) -> None:
        self.make, self._fails_at_s = make, fails_at_s
        self._stretches = [Stretch(0.0, make.ambient_c, make.ambient_c)]
        self._starts = [-math.inf]
        self.rests_from_s = -math.inf
        self._rests_at_c = make.ambient_c

    def __call__(self, instant_s: float) -> float:
        """Temperature at an instant, degC."""
        if instant_s >= self.rests_from_s:
            return self._rests_at_c
        return self._stretches[bisect_right(self._starts, instant_s) - 1].temperature_c(instant_s)

    def regulate(self, now_s: float, goal_c: float) -> None:
        """Go for a temperature from now on.

        Source
        ------
        dT/dt = (goal - T)/tau, held within the slew: a straight line until the gap is slew times tau, then an
        exponential; both meet with the same slope.
        """
        if self._rests_at(now_s, goal_c):
            return
        here_c, make = self(now_s), self.make
        knee_k = make.slew_k_per_s * make.time_constant_s
        gap_k = goal_c - here_c
        self._cut(now_s)
        if abs(gap_k) > knee_k:
            rate = math.copysign(make.slew_k_per_s, gap_k)
            self._add(Stretch(now_s, here_c, goal_c, rate))
            now_s += (abs(gap_k) - knee_k) / make.slew_k_per_s
            here_c = goal_c - math.copysign(knee_k, gap_k)
        self._close_on(now_s, here_c, goal_c, make.time_constant_s)
        if self._fails_at_s < math.inf:
            self._leave(self._fails_at_s)

    def leave(self, now_s: float) -> None:
        """Drive it no more: it goes back to ambient."""
        if now_s < self._fails_at_s and not self._rests_at(now_s, self.make.ambient_c):
            self._leave(now_s)

    def _rests_at(self, now_s: float, goal_c: float) -> bool:
        return now_s >= self.rests_from_s and goal_c == self._rests_at_c

    def _leave(self, now_s: float) -> None:
        here_c = self(now_s)
        self._cut(now_s)
        self._close_on(now_s, here_c, self.make.ambient_c, self.make.idle_time_constant_s)

    def _close_on(self, start_s: float, begin_c: float, goal_c: float, time_constant_s: float) -> None:
        self._add(Stretch(start_s, begin_c, goal_c, time_constant_s=time_constant_s))
        self.rests_from_s, self._rests_at_c = start_s + SETTLED * time_constant_s, goal_c

    def _cut(self, now_s: float) -> None:
        """Forget what lies ahead."""
        keep = bisect_right(self._starts, now_s)
        del self._stretches[keep:], self._starts[keep:]

    def _add(self, stretch: Stretch) -> None:
        self._stretches.append(stretch)
        self._starts.append(stretch.start_s)
