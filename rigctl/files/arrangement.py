"""From a recipe's optics to the train that computes powers.

It owns which quantities a train has, and what is known of each: unknown, free, held by a prior, or exact.
"""

from collections.abc import Collection, Iterator

from rigctl.files.recipe import OpticalElement, Recipe
from rigctl.optics import Detector, Element, Quantity, Train
from rigctl.quantities import Measured

POWER_UNSTATED_W = 1e-3
"""Where the recipe does not say how bright its source is, the fit starts from one milliwatt."""
ZERO = Measured(0.0)


def train_of(recipe: Recipe, *, filled: Collection[str] | None = None) -> Train:
    """Return the train of a recipe, every quantity at its nominal value.

    Parameters
    ----------
    filled
        Roles that the rig fills: a pick-off whose optional power meter is missing takes its part of the light all
        the same, but nothing reads it. None: all of them.
    """
    optics = [part for part in recipe.optics if part.kind != "detector"]
    detectors = tuple(_detectors(recipe))
    quantities = [*_source_quantities(recipe)]
    for part in optics:
        quantities += _element_quantities(part)
    at_end = {part.name: part for part in recipe.optics if part.kind == "detector"}
    quantities += [_stray_light(detector.name, at_end.get(detector.name)) for detector in detectors]
    train = Train(
        elements=tuple(map(_element, optics)),
        detectors=detectors,
        quantities={quantity.name: quantity for quantity in quantities},
    )
    return train if filled is None else train.read_by(filled)


def _detectors(recipe: Recipe) -> Iterator[Detector]:
    """Yield every detector in the order of the light: those of pick-offs before those at the end."""
    for part in recipe.optics:
        role = part.to or part.role
        if role is not None:
            yield Detector(role, after=part.name if part.kind == "pick-off" else None)


def _element(part: OpticalElement) -> Element:
    return Element(part.name, part.kind, part.turned_by, part.warmed_by, part.reference_temperature_c)


def _source_quantities(recipe: Recipe) -> list[Quantity]:
    """Power and drift; a stated power only says where to look, as it is the scale of everything."""
    power = recipe.source.power or Measured(POWER_UNSTATED_W)
    drift = recipe.source.drift or ZERO
    return [
        Quantity("source.power", "power", power.value, is_free=True),
        Quantity("source.drift", "drift", drift.value, drift.u, is_free=drift.u is None),
    ]


def _element_quantities(part: OpticalElement) -> list[Quantity]:
    """Return what is known of an element: every quantity that its kind, its mount and its oven give it."""
    has = {
        "axis": ("angle", part.axis),
        "extinction ratio": ("ratio", part.extinction_ratio),
        "retardance": ("retardance", part.retardance),
        "fraction": ("fraction", part.fraction),
        "dial offset": ("angle", part.dial_offset),
        "temperature coefficient": ("coefficient", part.temperature_coefficient),
    }
    return [_quantity(part, name, kind, value) for name, (kind, value) in has.items() if value is not None]


def _quantity(part: OpticalElement, name: str, kind: str, measured: Measured) -> Quantity:
    address, is_unknown, each = f"{part.name}.{name}", name in part.unknown, part.each.get(name)
    return Quantity(address, kind, measured.value, measured.u, is_unknown=is_unknown, each=each)


def _stray_light(role: str, part: OpticalElement | None) -> Quantity:
    """Return the light beside the beam; where nothing is said of it, it is fitted freely."""
    stray = ZERO if part is None else part.stray_light or ZERO
    is_unknown = part is not None and "stray light" in part.unknown
    each = None if part is None else part.each.get("stray light")
    return Quantity(
        f"{role}.stray light", "power", stray.value, stray.u, is_unknown=is_unknown, is_free=stray.u is None, each=each
    )
