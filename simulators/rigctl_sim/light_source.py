"""The source of the light: its power as a function of time.

It owns drift and noise; what drives and cools a diode is told by others.
"""

from collections.abc import Callable
from dataclasses import dataclass
from typing import ClassVar, Protocol

from rigctl_sim.diode import Diode
from rigctl_sim.source_noise import SourceNoise
from rigctl_sim.trajectory import Trajectory

_HOUR_S = 3600.0


class Emission(Protocol):
    """What emits, were there no drift and no noise; `is_driven` tells whether the bench can switch it."""

    is_driven: ClassVar[bool]

    def power_w(self, instant_s: float) -> float:
        """Power at an instant, W."""

    def moving(self) -> tuple[Trajectory, ...]:
        """Return what makes it change within less than a second."""

    def is_on(self, instant_s: float) -> bool:
        """Whether it is on, however little light it may give."""


@dataclass(frozen=True, slots=True)
class Steady:
    """A source of its own that nobody drives."""

    is_driven: ClassVar[bool] = False
    steady_w: float

    def power_w(self, instant_s: float) -> float:  # noqa: ARG002
        """Return the power, W."""
        return self.steady_w

    def moving(self) -> tuple[Trajectory, ...]:
        """Return nothing."""
        return ()

    def is_on(self, instant_s: float) -> bool:  # noqa: ARG002
        """It always is."""
        return True


@dataclass(frozen=True, slots=True)
class Driven:
    """A diode, with its current in A and its temperature in degC as functions of time."""

    is_driven: ClassVar[bool] = True
    diode: Diode
    current: Trajectory
    temperature: Callable[[float], float]

    def power_w(self, instant_s: float) -> float:
        """Power at an instant, W."""
        return self.diode.power_at(self.current(instant_s), self.temperature(instant_s))

    def moving(self) -> tuple[Trajectory, ...]:
        """Return the current; a temperature takes its time."""
        return (self.current,)

    def is_on(self, instant_s: float) -> bool:
        """Whether any current flows."""
        return self.current(instant_s) > 0.0


@dataclass(frozen=True, slots=True)
class Source:
    """An emission whose power drifts at a constant rate from instant 0 on, with noise of its own."""

    emission: Emission
    drift_per_h: float
    noise: SourceNoise

    def power_at(self, instant_s: float) -> float:
        """Power at an instant, W, noise left out."""
        return self.emission.power_w(instant_s) * (1.0 + self.drift_per_h * instant_s / _HOUR_S)
