"""Kinds of quantities and their units: the one table of what people may write.

It owns names and sizes; it reads no text.
"""

import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Literal

Sign = Literal["any", "positive", "not negative"]


@dataclass(frozen=True, slots=True)
class Kind:
    """One kind of quantity.

    `units` maps each unit to its size in the base unit, `offsets` those whose zero is not the base unit's to where
    that zero lies, `least` is what nothing lies below; `shown` are the units that `format_quantity` picks
    from, ascending; `per_wavelength` maps units of length in which a kind may be given once the wavelength is
    known; `needs_unit` tells whether a bare number is refused, `sign` what the kind's nature allows.
    """

    name: str
    units: Mapping[str, float]
    shown: tuple[str, ...]
    example: str
    per_wavelength: Mapping[str, float] = field(default_factory=dict)
    needs_unit: bool = True
    sign: Sign = "any"
    offsets: Mapping[str, float] = field(default_factory=dict)
    least: float = -math.inf

    @property
    def noun(self) -> str:
        """The kind with its article."""
        return f"{'an' if self.name[0] in 'aeiou' else 'a'} {self.name}"

    @property
    def phrase(self) -> str:
        """The kind and an example of it, for messages."""
        return f"{self.noun} such as {self.example}"

    @property
    def unit_names(self) -> tuple[str, ...]:
        """Every unit that may be written."""
        return (*self.units, *self.per_wavelength)


def _micro(unit: str, size: float) -> dict[str, float]:
    """Three ways of writing micro: the letter u, the micro sign and the Greek letter."""
    return {f"{prefix}{unit}": size for prefix in ("u", "\u00b5", "\u03bc")}


ABSOLUTE_ZERO_C = -273.15
"""Source: the definition of the degree Celsius, SI brochure, 9th edition, section 2.3.1."""
DEG_PER_RAD = 180.0 / math.pi
_LENGTHS = {"nm": 1e-9, **_micro("m", 1e-6)}
_ANGLES = {"deg": 1.0, "°": 1.0, "rad": DEG_PER_RAD, "mrad": DEG_PER_RAD / 1e3}
_ARCS = {"arcmin": 1 / 60, "arcsec": 1 / 3600}
_WAVES = {"waves": 1.0, "wave": 1.0, "deg": 1 / 360, "°": 1 / 360, "rad": DEG_PER_RAD / 360}
_POWERS = {"W": 1.0, "mW": 1e-3, **_micro("W", 1e-6), "nW": 1e-9, "pW": 1e-12}
_TIMES = {"s": 1.0, "ms": 1e-3, **_micro("s", 1e-6), "min": 60.0, "h": 3600.0, "d": 86400.0}
_DRIFTS = {"1/h": 1.0, "%/h": 1e-2, "ppm/h": 1e-6, "1/d": 1 / 24, "%/d": 1e-2 / 24}
_SPEEDS = {"deg/s": 1.0, "°/s": 1.0, "rad/s": DEG_PER_RAD, "rpm": 6.0}
_CURRENTS = {"A": 1.0, "mA": 1e-3, **_micro("A", 1e-6)}
_RAMPS = {"A/s": 1.0, "mA/s": 1e-3, **_micro("A/s", 1e-6)}
_SLOPES = {"K/s": 1.0, "K/min": 1 / 60, "mK/s": 1e-3, "mK/min": 1e-3 / 60}
_RESISTANCES = {"ohm": 1.0, "Ohm": 1.0, "Ω": 1.0, "kohm": 1e3, "kOhm": 1e3, "kΩ": 1e3}
_COEFFICIENTS = {"1/K": 1.0, "%/K": 1e-2, "ppm/K": 1e-6}
_ACCELERATIONS = {"deg/s2": 1.0, "deg/s^2": 1.0, "deg/s²": 1.0, "°/s2": 1.0, "rad/s2": DEG_PER_RAD}

KINDS: Mapping[str, Kind] = {
    kind.name: kind
    for kind in (
        Kind("angle", _ANGLES | _ARCS, ("deg",), "22.5 deg"),
        Kind("retardance", _WAVES, ("waves",), "0.25 waves", per_wavelength=_LENGTHS),
        Kind("ratio", {"%": 1e-2, "dB": math.nan}, (), "1000:1", needs_unit=False),
        Kind("power", _POWERS, ("pW", "nW", "uW", "mW", "W"), "2 mW"),
        Kind("time", _TIMES, ("us", "ms", "s", "min", "h"), "400 ms", sign="not negative"),
        Kind("length", {"m": 1.0, "mm": 1e-3, **_LENGTHS}, ("nm", "um", "mm", "m"), "785.2 nm", sign="positive"),
        Kind("drift", _DRIFTS, ("%/h",), "0.5 %/h"),
        Kind("angular speed", _SPEEDS, ("deg/s",), "20 deg/s", sign="positive"),
        Kind("angular acceleration", _ACCELERATIONS, ("deg/s2",), "100 deg/s2", sign="positive"),
        Kind(
            "temperature",
            {"degC": 1.0, "°C": 1.0, "K": 1.0},
            ("degC",),
            "25 degC",
            offsets={"K": ABSOLUTE_ZERO_C},
            least=ABSOLUTE_ZERO_C,
        ),
        Kind("temperature difference", {"K": 1.0, "mK": 1e-3}, ("K",), "0.05 K"),
        Kind("temperature slope", _SLOPES, ("K/min",), "0.01 K/min", sign="positive"),
        Kind("current", _CURRENTS, ("uA", "mA", "A"), "34 mA"),
        Kind("current slope", _RAMPS, ("uA/s", "mA/s", "A/s"), "5 mA/s", sign="positive"),
        Kind("voltage", {"V": 1.0, "mV": 1e-3}, ("mV", "V"), "2.5 V"),
        Kind("resistance", _RESISTANCES, ("ohm", "kohm"), "10 kohm", sign="positive"),
        Kind("coefficient", _COEFFICIENTS, ("ppm/K",), "-100 ppm/K"),
        Kind("frequency", {"Hz": 1.0, "kHz": 1e3}, ("Hz", "kHz"), "50 Hz", sign="positive"),
        Kind("count", {"readings": 1.0, "reading": 1.0}, (), "4 readings", needs_unit=False),
        Kind("number", {}, (), "2", needs_unit=False),
    )
}
