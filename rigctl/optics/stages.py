"""The elements as the visits meet them: turned, warmed, taken out, and each with the value of its level.

It owns the columns that stand behind one address, and the light from plane to plane; it knows no detector.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from rigctl.errors import PlanError
from rigctl.optics.forms import FORMS
from rigctl.optics.kernel import Array, Coefficients, Flags, Stokes, as_number, through
from rigctl.optics.parts import Element, at_level
from rigctl.optics.train import Train
from rigctl.optics.visits import Visits

DEGREE = np.pi / 180.0
AWAY = Coefficients(1.0, 0.0, 1.0, 0.0)  # an element that is not in the beam
NOTHING = Coefficients(0.0, 0.0, 0.0, 0.0)
# The strength grows by the temperature coefficient; a leak is the root of what does.
WARMING_POWERS = {"leak": 0.5}


@dataclass(frozen=True, slots=True)
class Stage:
    """An element as the visits meet it.

    Parameters
    ----------
    element
        Which one.
    turn
        Cosine and sine of twice its azimuth, shape (n,).
    coefficients
        Its coefficients, numbers or columns.
    slopes
        Slopes of the coefficients with the quantities that make them, by address.
    is_in
        Whether it was in the beam, shape (n,); None: always.
    """

    element: Element
    turn: tuple[Array, Array]
    coefficients: Coefficients
    slopes: Mapping[str, Coefficients]
    is_in: Flags | None

    def seen(self, column: Array) -> Array:
        """A column, 0 where the element was out of the beam."""
        return column if self.is_in is None else column * self.is_in


def value_at(train: Train, visits: Visits, values: Mapping[str, float], address: str) -> float:
    """The value behind an address: a number, or a column where each level has its own.

    Values may themselves be columns of shape (G, 1); the column is then of shape (G, n).
    """
    each = train.quantities[address].each
    if each is None:
        return values[address]
    levels = visits.levels_for(each, address)
    own = [np.atleast_1d(values.get(at_level(address, label), values[address])) for label in levels.labels]
    column = np.concatenate(np.broadcast_arrays(*own), axis=-1)[..., levels.index]
    return as_number(column)


def stage_of(train: Train, element: Element, visits: Visits, values: Mapping[str, float]) -> Stage:
    """One element as the visits meet it."""
    is_in = visits.present.get(element.name)
    coefficients, slopes = _strength(train, element, visits, values)
    if is_in is not None and not is_in.all():
        coefficients = _where(is_in, coefficients, AWAY)
        slopes = {address: _where(is_in, slope, NOTHING) for address, slope in slopes.items()}
    return Stage(element, _turn(train, element, visits, values), coefficients, slopes, is_in)


def _where(is_in: Flags, inside: Coefficients, outside: Coefficients) -> Coefficients:
    return Coefficients(*(as_number(np.where(is_in, one, other)) for one, other in zip(inside, outside, strict=True)))


def _turn(train: Train, element: Element, visits: Visits, values: Mapping[str, float]) -> tuple[Array, Array]:
    azimuth_deg = _mount_deg(element, visits)
    if element.axis is not None:
        azimuth_deg = azimuth_deg + value_at(train, visits, values, element.axis)
    if element.dial_offset is not None:
        azimuth_deg = azimuth_deg - value_at(train, visits, values, element.dial_offset)
    twice = (2.0 * DEGREE) * azimuth_deg
    return np.cos(twice), np.sin(twice)


def _mount_deg(element: Element, visits: Visits) -> Array:
    if element.mount is None:
        return np.zeros(visits.count)
    if element.mount not in visits.angle_deg:
        raise PlanError(f"the visits do not say where '{element.mount}' stood", where=element.name)
    return visits.angle_deg[element.mount]


def _strength(
    train: Train, element: Element, visits: Visits, values: Mapping[str, float]
) -> tuple[Coefficients, dict[str, Coefficients]]:
    """Coefficients, and their slopes with the strength and the temperature coefficient."""
    kind = train.quantities[element.strength].kind
    strength = value_at(train, visits, values, element.strength)
    if element.temperature_coefficient is None:
        coefficients, slopes = FORMS[kind](strength)
        return coefficients, {element.strength: slopes}
    coefficient = value_at(train, visits, values, element.temperature_coefficient)
    growth, slope = warming(kind, coefficient, _warmer_k(element, visits))
    coefficients, slopes = FORMS[kind](strength * growth)
    return coefficients, {
        element.strength: _times(slopes, growth),
        element.temperature_coefficient: _times(slopes, strength * slope),
    }


def warming(kind: str, coefficient: float, warmer_k: float) -> tuple[float, float]:
    """Factor on a strength in one of its forms at a temperature, and its slope with the coefficient.

    Source
    ------
    Definition of the coefficient: relative change per kelvin from the reference temperature.
    """
    power = WARMING_POWERS.get(kind, 1.0)
    linear = 1.0 + coefficient * warmer_k
    return linear**power, power * linear ** (power - 1.0) * warmer_k


def _warmer_k(element: Element, visits: Visits) -> float:
    """Temperature above the reference, a column."""
    role = element.warmed_by or ""
    if role not in visits.temperature_c:
        raise PlanError(f"the visits do not say how warm '{role}' was", where=element.name)
    return as_number(visits.temperature_c[role] - element.reference_c)


def _times(slopes: Coefficients, factor: float) -> Coefficients:
    return Coefficients(*(slope * factor for slope in slopes))


def stages_of(train: Train, visits: Visits, values: Mapping[str, float]) -> list[Stage]:
    """All elements in the order of the light."""
    return [stage_of(train, element, visits, values) for element in train.elements]


def planes_of(train: Train, visits: Visits, stages: Sequence[Stage]) -> list[Stokes[Array]]:
    """Light of a steady source of unit power at each plane: in front of the first element, and behind each."""
    S0, S1, S2, S3 = (np.full(visits.count, component) for component in train.source)
    planes = [(S0, S1, S2, S3)]
    for stage in stages:
        planes.append(through(planes[-1], stage.turn, stage.coefficients))
    return planes
