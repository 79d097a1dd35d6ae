"""From a recipe's optics to the train that computes powers.

It owns which quantities a train has, and what is known of each: unknown, free, held by a prior, or exact.
"""

from rigctl.files.recipe import OpticalElement, Recipe
from rigctl.optics import Detector, Element, Quantity, Train
from rigctl.quantities import Measured

POWER_UNSTATED_W = 1e-3
"""Where the recipe does not say how bright its source is, the fit starts from one milliwatt."""
ZERO = Measured(0.0)


def train_of(recipe: Recipe) -> Train:
    """Return the train of a recipe, every quantity at its nominal value."""
    optics = [part for part in recipe.optics if part.kind != "detector"]
    detectors = [part for part in recipe.optics if part.kind == "detector"]
    quantities = [*_source_quantities(recipe)]
    for part in optics:
        quantities += _element_quantities(part)
    quantities += [_stray_light(part) for part in detectors]
    return Train(
        elements=tuple(Element(part.name, part.kind, part.turned_by) for part in optics),
        detectors=tuple(Detector(part.name) for part in detectors),
        quantities={quantity.name: quantity for quantity in quantities},
    )


def _source_quantities(recipe: Recipe) -> list[Quantity]:
    """Power and drift; a stated power only says where to look, as it is the scale of everything."""
    power = recipe.source.power or Measured(POWER_UNSTATED_W)
    drift = recipe.source.drift or ZERO
    return [
        Quantity("source.power", "power", power.value, is_free=True),
        Quantity("source.drift", "drift", drift.value, drift.u, is_free=drift.u is None),
    ]


def _element_quantities(part: OpticalElement) -> list[Quantity]:
    found = [_quantity(part, "axis", "angle", part.axis or ZERO)]
    if part.kind == "polarizer":
        found.append(_quantity(part, "extinction ratio", "ratio", part.extinction_ratio or ZERO))
    else:
        found.append(_quantity(part, "retardance", "retardance", part.retardance or ZERO))
    if part.turned_by is not None:
        found.append(_quantity(part, "dial offset", "angle", part.dial_offset or ZERO))
    return found


def _quantity(part: OpticalElement, name: str, kind: str, measured: Measured) -> Quantity:
    is_unknown = name in part.unknown
    return Quantity(f"{part.name}.{name}", kind, measured.value, measured.u, is_unknown=is_unknown)


def _stray_light(part: OpticalElement) -> Quantity:
    stray, is_unknown = part.stray_light or ZERO, "stray light" in part.unknown
    name = f"{part.name}.stray light"
    return Quantity(name, "power", stray.value, stray.u, is_unknown=is_unknown, is_free=stray.u is None)
