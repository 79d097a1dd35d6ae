"""What each kind of instrument can do, as its driver declares it from the rig file alone.

It owns values only; the contracts of the instruments are in `rigctl.interfaces`.
"""

import math
from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class StageCapabilities:
    """What a mount can do; travel and backlash in degrees, the bench's sense."""

    travel_deg: tuple[float, float]
    speed_deg_per_s: float
    acceleration_deg_per_s2: float
    backlash_deg: float
    resolution_deg: float
    can_spin: bool = False

    def travel_time_s(self, distance_deg: float) -> float:
        """Duration of a move with a trapezoidal (or triangular) speed profile, s."""
        distance, speed, acceleration = abs(distance_deg), self.speed_deg_per_s, self.acceleration_deg_per_s2
        if distance >= speed**2 / acceleration:
            return distance / speed + speed / acceleration
        return 2.0 * math.sqrt(distance / acceleration)


@dataclass(frozen=True, slots=True)
class MeterCapabilities:
    """What a power meter can do.

    `ranges_w` are full scales in ascending order; `time_constant_s` and `noise_w` belong to each range.
    `relative_noise` is the part of a reading's scatter that grows with the power, the source's own included.
    """

    ranges_w: tuple[float, ...]
    time_constant_s: tuple[float, ...]
    noise_w: tuple[float, ...]
    relative_noise: float
    saturation_w: float
    aperture_s: tuple[float, float]


@dataclass(frozen=True, slots=True)
class ShutterCapabilities:
    """What a shutter can do."""

    moves_in_s: float


@dataclass(frozen=True, slots=True)
class SourceCapabilities:
    """What a current source can do."""

    current_a: float
    """Largest current, A."""
    compliance_v: float
    """Largest compliance voltage, V."""
    resolution_a: float


@dataclass(frozen=True, slots=True)
class ControllerCapabilities:
    """What a temperature controller can do; `span_c` is what its plant can reach, degC."""

    span_c: tuple[float, float]
    resolution_k: float
    typical_rate_k_per_s: float
    """How fast a setpoint is approached, K/s; for forecasts only."""


@dataclass(frozen=True, slots=True)
class SwitchCapabilities:
    """What a slide or a relay can do."""

    moves_in_s: float


Capabilities = (
    StageCapabilities
    | MeterCapabilities
    | ShutterCapabilities
    | SourceCapabilities
    | ControllerCapabilities
    | SwitchCapabilities
)
