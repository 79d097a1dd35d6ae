"""Thermistors: what temperature a resistance stands for, and back.

It owns the two published forms of the curve and how people write their constants. Pure. It knows no sensor's
constants: curves of different makes differ by half a kelvin at room temperature, so none is ever assumed.
"""

import math
import re
from dataclasses import dataclass
from typing import Protocol

from rigctl.errors import QuantityError
from rigctl.kinds import ABSOLUTE_ZERO_C
from rigctl.quantities import LONGEST_TEXT, format_quantity, parse_quantity

EXAMPLE = "A 1.12924e-3, B 2.34108e-4, C 8.7755e-8 or beta 3976 K, 10 kOhm at 25 degC"
ROOM_C = 25.0
ROOM_OHM = (10.0, 1e7)
"""Resistances at 25 degC between which every catalogue of such sensors stays, ohm; from memory."""
ROOM_FALL_PER_K = (0.01, 0.1)
"""Relative fall of the resistance at 25 degC, 1/K; catalogues have 2.5 to 6 %/K; from memory."""

_CURVE = re.compile(r"A (?P<a>[^,]+), *B (?P<b>[^,]+), *C (?P<c>[^,]+)")
_BETA = re.compile(r"beta (?P<beta>[^,]+), *(?P<r0>[^,]+?) at (?P<t0>[^,]+)")
_DIGITS = 12


class Thermistor(Protocol):
    """A curve. An open sensor reads as cold as can be, a shorted one infinitely hot; neither is a temperature."""

    def temperature_c(self, resistance_ohm: float) -> float:
        """Return the temperature at a resistance, degC; +inf where the curve ends."""

    def resistance_ohm(self, temperature_c: float) -> float:
        """Return the resistance at a temperature above absolute zero, ohm."""


@dataclass(frozen=True, slots=True)
class SteinhartHart:
    """1/T = A + B ln R + C (ln R)^3 with T in K and R in ohm; B is above zero and C not below.

    Source
    ------
    J. S. Steinhart, S. R. Hart, "Calibration curves for thermistors", Deep-Sea Research 15, 497-503 (1968).
    """

    a: float
    b: float
    c: float

    def temperature_c(self, resistance_ohm: float) -> float:
        """Return the temperature at a resistance, degC; +inf where the curve ends."""
        if not resistance_ohm > 0.0:
            return math.inf
        log = math.log(resistance_ohm)
        cubic = self.c * log**3 if self.c else 0.0
        return _celsius(self.a + self.b * log + cubic)

    def resistance_ohm(self, temperature_c: float) -> float:
        """Return the resistance at a temperature above absolute zero, ohm.

        Source
        ------
        The real root of the cubic by hyperbolic functions, which loses no digits where C is small.
        """
        height = 1.0 / (temperature_c - ABSOLUTE_ZERO_C) - self.a
        bend = math.sqrt(3.0 * self.c / self.b)
        if bend == 0.0:
            return math.exp(height / self.b)
        return math.exp(2.0 / bend * math.sinh(math.asinh(1.5 * height / self.b * bend) / 3.0))

    def __str__(self) -> str:
        return f"A {self.a!r}, B {self.b!r}, C {self.c!r}"


@dataclass(frozen=True, slots=True)
class Beta:
    """1/T = 1/T0 + ln(R/R0) / beta with T and T0 in K; `r0_ohm` and `beta_k` are above zero.

    Source
    ------
    IEC 60539-1, definition of the B value; from memory.
    """

    r0_ohm: float
    t0_c: float
    beta_k: float

    def temperature_c(self, resistance_ohm: float) -> float:
        """Return the temperature at a resistance, degC; +inf where the curve ends."""
        if not resistance_ohm > 0.0:
            return math.inf
        return _celsius(1.0 / (self.t0_c - ABSOLUTE_ZERO_C) + math.log(resistance_ohm / self.r0_ohm) / self.beta_k)

    def resistance_ohm(self, temperature_c: float) -> float:
        """Return the resistance at a temperature above absolute zero, ohm."""
        distance = 1.0 / (temperature_c - ABSOLUTE_ZERO_C) - 1.0 / (self.t0_c - ABSOLUTE_ZERO_C)
        return self.r0_ohm * math.exp(self.beta_k * distance)

    def __str__(self) -> str:
        r0 = format_quantity(self.r0_ohm, "resistance", digits=_DIGITS)
        t0 = format_quantity(self.t0_c, "temperature", digits=_DIGITS)
        return f"beta {self.beta_k:.{_DIGITS}g} K, {r0} at {t0}"


def parse_thermistor(text: str) -> SteinhartHart | Beta:
    """Read the constants of a sensor: `A 1.12924e-3, B 2.34108e-4, C 8.7755e-8` or `beta 3976 K, 10 kOhm at 25 degC`.

    Raises
    ------
    QuantityError
        The text has neither form, or no thermistor has such constants: a power of ten lost, a sign turned.
    """
    bare = text.strip()[: LONGEST_TEXT + 1]
    sensor: SteinhartHart | Beta
    if found := _CURVE.fullmatch(bare):
        sensor = SteinhartHart(*(parse_quantity(found[name], "number") for name in "abc"))
        is_falling = sensor.b > 0.0 and sensor.c >= 0.0
    elif found := _BETA.fullmatch(bare):
        r0_ohm, t0_c = parse_quantity(found["r0"], "resistance"), parse_quantity(found["t0"], "temperature")
        sensor = Beta(r0_ohm, t0_c, parse_quantity(found["beta"], "temperature difference"))
        is_falling = sensor.beta_k > 0.0 and t0_c > ABSOLUTE_ZERO_C
    else:
        raise QuantityError(f"'{bare}' gives no constants of a thermistor", expected=EXAMPLE)
    if not (is_falling and _is_catalogued(sensor)):
        raise QuantityError(f"no thermistor has the constants '{bare}'", expected=f"those of its data sheet: {EXAMPLE}")
    return sensor


def _celsius(per_kelvin: float) -> float:
    return 1.0 / per_kelvin + ABSOLUTE_ZERO_C if per_kelvin > 0.0 else math.inf


def _is_catalogued(sensor: Thermistor) -> bool:
    """Whether resistance and slope at 25 degC are those of a sensor that is made."""
    try:
        here, warmer = sensor.resistance_ohm(ROOM_C), sensor.resistance_ohm(ROOM_C + 0.1)
    except OverflowError:
        return False
    return (
        ROOM_OHM[0] <= here <= ROOM_OHM[1] and ROOM_FALL_PER_K[0] <= (1.0 - warmer / here) / 0.1 <= ROOM_FALL_PER_K[1]
    )
