"""The parts of a train: elements, detectors, and the quantities that say what is known of them.

It owns names and addresses, `<element, source or detector>.<quantity>`; it never computes a power.
"""

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType

POWER = "source.power"
DRIFT = "source.drift"
STRAY_LIGHT = "stray light"
GAIN = "gain"
DIAL_OFFSET = "dial offset"
TEMPERATURE_COEFFICIENT = "temperature coefficient"
POLARIZER, RETARDER, PICK_OFF = "polarizer", "retarder", "pick-off"
# The quantity that says what an element does, by its kind.
STRENGTHS: Mapping[str, str] = MappingProxyType(
    {POLARIZER: "extinction ratio", RETARDER: "retardance", PICK_OFF: "fraction"}
)
LEVEL_MARK = " @ "
USUAL_REFERENCE_C = 25.0  # where catalogues state their values


def at_level(address: str, label: str) -> str:
    """Address of a quantity at one of its levels, such as `part.retardance @ 22 degC`."""
    return f"{address}{LEVEL_MARK}{label}"


def range_key(detector: str) -> str:
    """Key of `Visits.levels` under which the ranges of a detector are told."""
    return f"range of {detector}"


def base_of(address: str) -> str:
    """Address without its level."""
    return address.partition(LEVEL_MARK)[0]


@dataclass(frozen=True, slots=True)
class Quantity:
    """One number of the train and what is known of it.

    Parameters
    ----------
    name
        Address, such as `part.retardance`.
    kind
        `angle` (deg), `retardance` (waves), `ratio`, `fraction`, `gain`, `power` (W), `drift` (1/h, relative) or
        `coefficient` (1/K, relative). A fit also uses `cosine` for a retardance and `leak` for an extinction ratio.
    value
        Nominal value.
    u
        Standard uncertainty. For an unknown it only says where to look; otherwise it is a prior.
    is_unknown
        To be found and reported.
    is_free
        Fitted though nobody asked for it: power, drift, stray light.
    each
        Key of `Visits.levels`: one value for each level instead of one for all. None: the same everywhere.
    """

    name: str
    kind: str
    value: float
    u: float | None = None
    is_unknown: bool = False
    is_free: bool = False
    each: str | None = None

    @property
    def is_fitted(self) -> bool:
        """Whether a fit varies it."""
        return self.is_unknown or self.is_free or bool(self.u)

    @property
    def prior_u(self) -> float | None:
        """Standard uncertainty of what is known beforehand, or None when nothing is."""
        return None if self.is_unknown or not self.u else self.u


@dataclass(frozen=True, slots=True)
class Element:
    """A polarizer, a retarder or a pick-off.

    Parameters
    ----------
    name, kind
        The kind is `polarizer`, `retarder` or `pick-off`; the last takes a fraction of the light out of the beam
        and does not polarize.
    mount
        Role of the mount that turns it, if one does.
    warmed_by
        Role of what sets its temperature, if something does: its strength (extinction ratio, retardance) then
        grows by its temperature coefficient for each kelvin.
    reference_temperature_c
        Temperature at which the strength has its stated value; None: 25 degC, usual in catalogues.
    """

    name: str
    kind: str
    mount: str | None = None
    warmed_by: str | None = None
    reference_temperature_c: float | None = None

    def address(self, short_name: str) -> str:
        """Address of one of its quantities."""
        return f"{self.name}.{short_name}"

    @property
    def strength(self) -> str:
        """Address of its extinction ratio, retardance or fraction."""
        return self.address(STRENGTHS[self.kind])

    @property
    def axis(self) -> str | None:
        """Address of its axis, if it has one."""
        return None if self.kind == PICK_OFF else self.address("axis")

    @property
    def dial_offset(self) -> str | None:
        """Address of its dial offset, if a mount turns it."""
        return self.address(DIAL_OFFSET) if self.mount else None

    @property
    def temperature_coefficient(self) -> str | None:
        """Address of its relative change per kelvin, if something warms it."""
        return self.address(TEMPERATURE_COEFFICIENT) if self.warmed_by else None

    @property
    def reference_c(self) -> float:
        """Temperature at which its strength has its stated value, degC."""
        return USUAL_REFERENCE_C if self.reference_temperature_c is None else self.reference_temperature_c

    @property
    def addresses(self) -> tuple[str, ...]:
        """Addresses of all its quantities."""
        every = (self.axis, self.strength, self.dial_offset, self.temperature_coefficient)
        return tuple(address for address in every if address is not None)


@dataclass(frozen=True, slots=True)
class Detector:
    """A detector under its role name: behind the named pick-off, or at the end of the train."""

    name: str
    after: str | None = None

    @property
    def stray_light(self) -> str:
        """Address of the light it sees that did not come through the train."""
        return f"{self.name}.{STRAY_LIGHT}"

    @property
    def gain(self) -> str:
        """Address of its reading per power; a train without this quantity has gain 1."""
        return f"{self.name}.{GAIN}"

    @property
    def range_key(self) -> str:
        """Key of `Visits.levels` under which its ranges are told."""
        return range_key(self.name)
