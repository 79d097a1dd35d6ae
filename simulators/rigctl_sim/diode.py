"""A laser diode in closed form: power and voltage as functions of current and temperature.

Pure arithmetic; it knows no time and no instrument.
"""

import math
from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Diode:
    """A diode without a soft knee and without heating of its own.

    Parameters
    ----------
    power_w
        What it emits at `current_a` and `temperature_c`; this scales everything else.
    threshold_a
        Where it begins to emit, at `temperature_c`; below `current_a`.
    characteristic_k
        Temperature rise that makes the threshold grow e-fold, K.

    Source
    ------
    P = slope (I - Ith(T)) above threshold, Ith(T) = I0 exp(T/T0): the empirical law of laser diodes; from
    memory. Public tables have T0 = 120 to 160 K for AlGaAs.
    """

    power_w: float
    current_a: float
    temperature_c: float
    threshold_a: float
    characteristic_k: float

    def threshold_at(self, temperature_c: float) -> float:
        """Current at which it begins to emit, A."""
        return self.threshold_a * math.exp((temperature_c - self.temperature_c) / self.characteristic_k)

    def power_at(self, current_a: float, temperature_c: float) -> float:
        """Power that it emits, W; nothing below its threshold."""
        slope_w_per_a = self.power_w / (self.current_a - self.threshold_a)
        return max(slope_w_per_a * (current_a - self.threshold_at(temperature_c)), 0.0)


@dataclass(frozen=True, slots=True)
class Load:
    """What a current source sees of a diode: its voltage is `turn_on_v` and `series_ohm` times the current.

    Source
    ------
    The usual straight line through a diode's forward curve; from memory.
    """

    turn_on_v: float
    series_ohm: float

    def voltage_at(self, current_a: float) -> float:
        """Voltage across it, V; nothing without a current."""
        return self.turn_on_v + self.series_ohm * current_a if current_a > 0.0 else 0.0
