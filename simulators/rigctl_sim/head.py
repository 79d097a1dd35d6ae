"""A detector head in the light: what it shows, averaged over a reading.

It owns the lag and the stray light. Noise of its own, ranges and overload belong to the instrument that reads the head.
"""

from typing import Protocol

from rigctl_sim.lag import FORGOTTEN, respond
from rigctl_sim.world import World


class Head(Protocol):
    """What a power meter reads."""

    def mean_w(self, begin_s: float, end_s: float, *, time_constant_s: float) -> float:
        """Mean of what the head shows over a stretch of the past, W; end after begin."""


class HeadBesideBeam:
    """A head that lies in the dark, as one that no role needs does."""

    def mean_w(self, begin_s: float, end_s: float, *, time_constant_s: float) -> float:  # noqa: ARG002
        """Show nothing."""
        return 0.0


class HeadInBeam:
    """A head with a first-order lag.

    Parameters
    ----------
    detector
        Its number among the detectors of the world.
    stray_w
        Light that reaches it whatever stands in the beam, W.
    """

    def __init__(self, world: World, detector: int, *, stray_w: float) -> None:
        self._world, self._detector, self._stray_w = world, detector, stray_w
        self._shown_at_s, self._shown_w = float("-inf"), 0.0

    def mean_w(self, begin_s: float, end_s: float, *, time_constant_s: float) -> float:
        """Mean of what the head shows over a stretch of the past, W; end after begin.

        Source
        ------
        First-order lag; a ramp (the source's drift) is shown late by one time constant. The source's noise is
        averaged over the reading itself, whatever the lag, so that heads of any make see the same.
        """
        light_w = self._mean_light_w(begin_s, end_s, time_constant_s)
        stray_w = self._stray_w * self._world.uncapped(0.5 * (begin_s + end_s))
        return light_w * (1.0 + self._world.flicker(begin_s, end_s)) + stray_w

    def _mean_light_w(self, begin_s: float, end_s: float, time_constant_s: float) -> float:
        remembers_from_s = begin_s - FORGOTTEN * time_constant_s
        if self._world.is_at_rest(remembers_from_s):
            middle_s = 0.5 * (begin_s + end_s)
            return self._world.light_w(middle_s - time_constant_s)[self._detector]
        if not remembers_from_s <= self._shown_at_s <= begin_s:
            self._shown_at_s = remembers_from_s
            self._shown_w = self._world.light_w(remembers_from_s)[self._detector]
        if self._shown_at_s < begin_s:
            self._follow(begin_s, time_constant_s)
        return self._follow(end_s, time_constant_s) / (end_s - begin_s)

    def _follow(self, end_s: float, time_constant_s: float) -> float:
        """Go on to an instant; return the integral of what was shown on the way, J."""
        at, total = self._detector, 0.0
        for duration_s, begin, middle, end in self._world.course(self._shown_at_s, end_s):
            light = (begin[at], middle[at], end[at])
            self._shown_w, energy = respond(
                self._shown_w, light, duration_s=duration_s, time_constant_s=time_constant_s
            )
            total += energy
        self._shown_at_s = end_s
        return total
