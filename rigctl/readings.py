"""What instruments say of themselves and of what they measure.

It owns values only; who says them is in `rigctl.interfaces`.
"""

from dataclasses import dataclass
from enum import IntFlag


class Flag(IntFlag):
    """What is wrong with the readings of one dwell; 0 is nothing."""

    OVERLOAD = 1
    UNDERRANGE = 2
    NOT_A_NUMBER = 4
    QUESTIONABLE = 8


@dataclass(frozen=True, slots=True)
class Dwell:
    """Readings of one detector at one visit.

    `levels_w` has one entry a reading, NaN where the reading was a flag; `flags` is their union.
    `began_s` and `ended_s` bound the integration.
    """

    levels_w: tuple[float, ...]
    flags: Flag
    range_w: float
    began_s: float
    ended_s: float


@dataclass(frozen=True, slots=True)
class Identity:
    """Who answered: the four fields of IEEE 488.2 `*IDN?`, empty where the convention has none."""

    maker: str
    model: str
    serial: str
    firmware: str

    @property
    def is_simulated(self) -> bool:
        """Whether a twin says of itself that it is one."""
        return self.model.startswith("simulated")


@dataclass(frozen=True, slots=True)
class SourceConditions:
    """What a current source reads back in one exchange."""

    current_a: float
    voltage_v: float
    is_on: bool
    is_interlock_open: bool
    is_at_compliance: bool
    is_tripped: bool


@dataclass(frozen=True, slots=True)
class ControllerConditions:
    """What a temperature controller reads back in one exchange; the temperature comes from the resistance."""

    temperature_c: float
    resistance_ohm: float
    is_on: bool
    is_at_limit: bool
