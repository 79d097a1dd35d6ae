"""The train: what the light meets between the source and the detectors, and every quantity of it.

It owns names and addresses, `<element, source or detector>.<quantity>`; it never computes a power.
"""

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace
from types import MappingProxyType

from rigctl.errors import PlanError
from rigctl.optics.kernel import Stokes

POWER = "source.power"
DRIFT = "source.drift"
STRAY_LIGHT = "stray light"
DIAL_OFFSET = "dial offset"
# The quantity that says what an element does, by its kind.
STRENGTHS: Mapping[str, str] = MappingProxyType({"polarizer": "extinction ratio", "retarder": "retardance"})
UNPOLARIZED: Stokes[float] = (1.0, 0.0, 0.0, 0.0)


@dataclass(frozen=True, slots=True)
class Quantity:
    """One number of the train and what is known of it.

    Parameters
    ----------
    name
        Address, such as `part.retardance`.
    kind
        `angle` (deg), `retardance` (waves), `ratio`, `power` (W) or `drift` (1/h, relative).
        A fit also uses `cosine` for a retardance and `leak` for an extinction ratio.
    value
        Nominal value.
    u
        Standard uncertainty. For an unknown it only says where to look; otherwise it is a prior.
    is_unknown
        To be found and reported.
    is_free
        Fitted though nobody asked for it: power, drift, stray light.
    """

    name: str
    kind: str
    value: float
    u: float | None = None
    is_unknown: bool = False
    is_free: bool = False

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
    """A polarizer or a retarder, fixed or turned by a mount (the mount's role name)."""

    name: str
    kind: str
    mount: str | None = None

    def address(self, short_name: str) -> str:
        """Address of one of its quantities."""
        return f"{self.name}.{short_name}"

    @property
    def strength(self) -> str:
        """Address of its extinction ratio or retardance."""
        return self.address(STRENGTHS[self.kind])

    @property
    def axis(self) -> str:
        """Address of its axis."""
        return self.address("axis")

    @property
    def dial_offset(self) -> str | None:
        """Address of its dial offset, if a mount turns it."""
        return self.address(DIAL_OFFSET) if self.mount else None

    @property
    def addresses(self) -> tuple[str, ...]:
        """Addresses of all its quantities."""
        return (self.axis, self.strength, *([self.dial_offset] if self.dial_offset else []))


@dataclass(frozen=True, slots=True)
class Detector:
    """A detector at the end of the train, under its role name."""

    name: str

    @property
    def stray_light(self) -> str:
        """Address of the light it sees that did not come through the train."""
        return f"{self.name}.{STRAY_LIGHT}"


@dataclass(frozen=True, slots=True)
class Train:
    """The light's way, in order, with a quantity for every address.

    A polarizer passes its axis fully (k1 = 1): its true transmission is part of the source's power.

    Parameters
    ----------
    elements
        In the order in which the light meets them.
    detectors
        All of them at the end.
    quantities
        By address: the elements' own, `source.power`, `source.drift` and each detector's stray light.
    source
        Stokes components of the light for unit power.

    Raises
    ------
    PlanError
        When a quantity is missing or belongs to nothing, or a kind is not known.
    """

    elements: tuple[Element, ...]
    detectors: tuple[Detector, ...]
    quantities: Mapping[str, Quantity]
    source: Stokes[float] = UNPOLARIZED

    def __post_init__(self) -> None:
        mistakes = list(self._mistakes())
        if mistakes:
            raise PlanError("; ".join(mistakes), where="optics", do="Mend the optics of the recipe.")

    def _mistakes(self) -> Iterator[str]:
        kinds = {e.kind for e in self.elements} - STRENGTHS.keys()
        if kinds:
            yield f"no element is called '{min(kinds)}': use polarizer or retarder"
            return
        addresses = self.addresses
        yield from (f"two parts of the train share '{a}'" for a in sorted(_repeated(addresses)))
        yield from (f"'{a}' has no value" for a in addresses if a not in self.quantities)
        yield from (f"'{a}' belongs to nothing in the train" for a in sorted(set(self.quantities) - set(addresses)))

    @property
    def addresses(self) -> tuple[str, ...]:
        """Every address, elements first, in the order of the light."""
        parts = [a for e in self.elements for a in e.addresses]
        return (*parts, POWER, DRIFT, *(d.stray_light for d in self.detectors))

    @property
    def fitted(self) -> tuple[Quantity, ...]:
        """The quantities that a fit varies, in the order of the light."""
        return tuple(self.quantities[a] for a in self.addresses if self.quantities[a].is_fitted)

    def values(self, x: Mapping[str, float]) -> dict[str, float]:
        """Nominal values, overlaid by those of `x`."""
        return {name: q.value for name, q in self.quantities.items()} | dict(x)

    def rewritten(self, *quantities: Quantity) -> "Train":
        """The same train with some quantities replaced."""
        return replace(self, quantities={**self.quantities, **{q.name: q for q in quantities}})


def _repeated(names: tuple[str, ...]) -> set[str]:
    return {name for name in names if names.count(name) > 1}
