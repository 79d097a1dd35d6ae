"""What a recipe wants of its quantities: tolerances that decide, and how well each is to be known.

It owns the addresses by which a recipe names its quantities, and the kind of each.
"""

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import TypeVar

from rigctl.errors import QuantityError
from rigctl.files.document import Document
from rigctl.files.mistakes import Mistakes, nearest_word, quoted
from rigctl.files.optics_references import QUANTITIES, elements_of, name_of
from rigctl.files.part import Part
from rigctl.kinds import KINDS
from rigctl.quantities import parse_span, parse_uncertainty

T = TypeVar("T")


@dataclass(frozen=True, slots=True)
class Wishes:
    """Tolerances and wanted standard uncertainties by address, in the base unit of the quantity."""

    tolerances: Mapping[str, tuple[float, float]]
    targets: Mapping[str, float]


@dataclass(frozen=True, slots=True)
class _Known:
    """A quantity of the optics: its kind, and the nominal value as it was written."""

    kind: str
    nominal: str


def read_wishes(document: Document, mistakes: Mistakes, *, wavelength_m: float | None) -> Wishes:
    """Read both mappings, and gather every mistake in them."""
    recipe = Part.whole(document, mistakes)
    known = _known(recipe.at("optics"))

    def span(text: str, quantity: _Known) -> tuple[float, float]:
        return parse_span(text, quantity.kind, wavelength_m=wavelength_m)

    def uncertainty(text: str, quantity: _Known) -> float:
        return parse_uncertainty(text, quantity.kind, nominal=quantity.nominal, wavelength_m=wavelength_m)

    return Wishes(
        _read(recipe.at("tolerance"), known, span), _read(recipe.at("target uncertainty"), known, uncertainty)
    )


def _known(optics: Part) -> dict[str, _Known]:
    """Return every quantity that the optics have, by its address."""
    known: dict[str, _Known] = {}
    for kind, part in elements_of(optics):
        name = name_of(kind, part).text
        for short, quantity in QUANTITIES[kind].items():
            nominal = part.at(short).text
            known[f"{name}.{short}"] = _Known(quantity, KINDS[quantity].example if nominal is None else nominal)
    return known


def _read(part: Part, known: Mapping[str, _Known], read: Callable[[str, _Known], T]) -> dict[str, T]:
    """Read the entries whose address is that of a quantity; gather the mistakes of all."""
    found: dict[str, T] = {}
    for address, entry in part.items().items():
        if address not in known:
            near = nearest_word(address, known)
            expected = "an element, a dot and a quantity, such as part.retardance"
            entry.wrong_key(f"no quantity is called {quoted(address)}", expected=expected, nearest=near)
        elif entry.text is not None:
            try:
                found[address] = read(entry.text, known[address])
            except QuantityError as error:
                entry.wrong(error.what, expected=error.expected, nearest=error.nearest)
    return found
