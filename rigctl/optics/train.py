"""The train: what the light meets between the source and the detectors, and every quantity of it.

It owns which quantities belong to it and in which order; it never computes a power.
"""

from collections.abc import Collection, Iterator, Mapping
from dataclasses import dataclass, replace

from rigctl.errors import PlanError
from rigctl.optics.kernel import Stokes
from rigctl.optics.parts import DRIFT, PICK_OFF, POWER, STRENGTHS, Detector, Element, Quantity, at_level, base_of
from rigctl.optics.visits import Visits

UNPOLARIZED: Stokes[float] = (1.0, 0.0, 0.0, 0.0)


@dataclass(frozen=True, slots=True)
class Train:
    """The light's way, in order, with a quantity for every address.

    A polarizer passes its axis fully (k1 = 1): its true transmission is part of the source's power.

    Parameters
    ----------
    elements
        In the order in which the light meets them.
    detectors
        At the end, or behind a pick-off.
    quantities
        By address: the elements' own, `source.power`, `source.drift`, each detector's stray light and, where it
        is not 1, its gain; once levelled, also those of the levels.
    source
        Stokes components of the light for unit power.

    Raises
    ------
    PlanError
        When a quantity is missing or belongs to nothing, a kind is not known, or a part is in the wrong place.
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
            yield f"no element is called '{min(kinds)}': use {', '.join(STRENGTHS)}"
            return
        addresses = self.addresses
        yield from (f"two parts of the train share '{a}'" for a in sorted(_repeated(addresses)))
        yield from (f"'{a}' has no value" for a in addresses if a not in self.quantities)
        known = {*addresses, *(q.name for a in addresses for q in self.levels_of(a))}
        yield from (f"'{a}' belongs to nothing in the train" for a in sorted(set(self.quantities) - known))
        yield from self._misplaced()

    def _misplaced(self) -> Iterator[str]:
        pick_offs = [e for e in self.elements if e.kind == PICK_OFF]
        yield from (f"a pick-off neither turns nor is warmed: '{e.name}'" for e in pick_offs if e.mount or e.warmed_by)
        missing = sorted({d.after for d in self.detectors if d.after} - {e.name for e in pick_offs})
        yield from (f"there is no pick-off '{name}' for a detector to stand behind" for name in missing)

    @property
    def addresses(self) -> tuple[str, ...]:
        """Every address, elements first, in the order of the light; those of levels left out."""
        parts = [a for e in self.elements for a in e.addresses]
        gains = [d.gain for d in self.detectors if d.gain in self.quantities]
        return (*parts, POWER, DRIFT, *(d.stray_light for d in self.detectors), *gains)

    def levels_of(self, address: str) -> tuple[Quantity, ...]:
        """The quantities that stand for this one at its levels; none before the train is levelled."""
        quantity = self.quantities.get(address)
        if quantity is None or quantity.each is None:
            return ()
        return tuple(q for name, q in self.quantities.items() if name.startswith(at_level(address, "")))

    @property
    def fitted(self) -> tuple[Quantity, ...]:
        """The quantities that a fit varies, in the order of the light."""
        every = [q for a in self.addresses for q in self.levels_of(a) or (self.quantities[a],)]
        return tuple(q for q in every if q.is_fitted)

    def element(self, name: str) -> Element:
        """The element of that name."""
        return next(element for element in self.elements if element.name == name)

    def values(self, x: Mapping[str, float]) -> dict[str, float]:
        """Nominal values, overlaid by those of `x`."""
        return {name: q.value for name, q in self.quantities.items()} | dict(x)

    def rewritten(self, *quantities: Quantity) -> "Train":
        """The same train with some quantities replaced or added."""
        return replace(self, quantities={**self.quantities, **{q.name: q for q in quantities}})

    def read_by(self, names: Collection[str]) -> "Train":
        """The same train with only the named detectors; their pick-offs stay in the light's way."""
        kept = tuple(d for d in self.detectors if d.name in names)
        gone = {a for d in self.detectors if d not in kept for a in (d.stray_light, d.gain)}
        quantities = {name: q for name, q in self.quantities.items() if base_of(name) not in gone}
        return replace(self, detectors=kept, quantities=quantities)

    def levelled(self, visits: Visits) -> "Train":
        """The same train with a quantity for each level of those that have levels.

        Raises
        ------
        PlanError
            When the visits do not tell these levels.
        """
        apart = [q for q in self.quantities.values() if q.each is not None]
        added = [
            replace(q, name=name, each=None)
            for q in apart
            for name in (at_level(q.name, label) for label in visits.levels_for(q.each or "", q.name).labels)
            if name not in self.quantities
        ]
        return self.rewritten(*added)


def _repeated(names: tuple[str, ...]) -> set[str]:
    return {name for name in names if names.count(name) > 1}
