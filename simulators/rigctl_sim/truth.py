"""The hidden truth of a simulated bench: a value for every quantity of the train, drawn from a seed.

It owns the rules of drawing; it knows no instrument. Each quantity is drawn on its own, so that one more in
the recipe leaves the others as they were.
"""

import math
from collections.abc import Mapping
from dataclasses import replace

from rigctl.optics import Element, Quantity, Train
from rigctl.optics.parts import TEMPERATURE_COEFFICIENT, at_level
from rigctl_sim.noise import generator

POWER_SPREAD = 0.1
"""Relative; what a source is off when nobody says better. This and what follows are usual on such benches."""
DRIFT_PER_H = 0.002
STRAY_PART = 0.0005
STRAY_SPREAD = 0.3
RETARDANCE_WAVES = 0.01
EXTINCTION_SPREAD = 0.3
FRACTION_SPREAD = 0.1
"""Relative, of a pick-off."""
COEFFICIENT_PER_K = 1.2e-4
"""How strongly a retardance goes with temperature where it is sought at each: that of quartz; S. M. Etzel, A. H. Rose,
C. M. Wang, Applied Optics 39, 5796 (2000); its abstract only was read."""
_POWER, _DRIFT, _STRAY, _OFFSET = "source.power", "source.drift", ".stray light", ".dial offset"
_POSITIVE = ("ratio", "fraction", "power")


def draw_truth(
    train: Train, seed: int, *, given: Mapping[str, float], power_u_w: float | None = None
) -> dict[str, float]:
    """Draw the truth.

    Parameters
    ----------
    train
        Nominal values with their tolerances.
    given
        Values that are not to be drawn, by address.
    power_u_w
        Standard uncertainty of the source's nominal power, W; None: nobody states one.

    Returns
    -------
    A value for every quantity, in its kind's base unit.
    """
    truth: dict[str, float] = {}
    power = train.quantities[_POWER]
    power = replace(power, u=power_u_w or POWER_SPREAD * power.value)
    for quantity in (power, *train.quantities.values()):
        if quantity.name not in truth:
            chosen = given.get(quantity.name)
            truth[quantity.name] = _drawn(train, quantity, seed, truth) if chosen is None else chosen
    return truth


def truth_at_levels(
    train: Train, truth: Mapping[str, float], levels: Mapping[str, Mapping[str, float | None]]
) -> dict[str, float]:
    """Return the truth of every quantity that is sought anew at each level, at each.

    Parameters
    ----------
    levels
        By the key of the levels: what each is called, and its temperature in degC if the key is one's role.

    Returns
    -------
    By addresses such as `part.retardance @ 22 degC`. An element that is warmed by the key is as warm as the level
    says; its quantities are otherwise the same at all levels.
    """
    found = {}
    for quantity in train.quantities.values():
        element = _owner(train, quantity)
        for label, temperature_c in levels.get(quantity.each or "", {}).items():
            value = truth[quantity.name]
            if element is not None and element.warmed_by == quantity.each and temperature_c is not None:
                warmer_k = temperature_c - element.reference_c
                value *= 1.0 + truth[element.address(TEMPERATURE_COEFFICIENT)] * warmer_k
            found[at_level(quantity.name, label)] = value
    return found


def _owner(train: Train, quantity: Quantity) -> Element | None:
    """Return the element whose strength a quantity is."""
    return next((element for element in train.elements if element.strength == quantity.name), None)


def _goes_with_temperature(train: Train, coefficient: Quantity) -> bool:
    """Whether the strength that a coefficient belongs to is sought at each temperature of its element."""
    owners = [e for e in train.elements if e.address(TEMPERATURE_COEFFICIENT) == coefficient.name]
    return any(train.quantities[owner.strength].each == owner.warmed_by for owner in owners)


def _drawn(train: Train, quantity: Quantity, seed: int, truth: Mapping[str, float]) -> float:
    value, spread = _centre(train, quantity, truth)
    source = generator(seed, f"truth of {quantity.name}")
    if spread is None:
        half_turn = 180.0 if quantity.name.endswith(_OFFSET) else 90.0
        return float(source.uniform(-half_turn, half_turn))
    if quantity.kind == "ratio" and quantity.is_unknown and not quantity.u:
        return value * math.exp(spread * source.standard_normal())
    while True:
        drawn = value + spread * float(source.standard_normal())
        if drawn > 0.0 or spread == 0.0 or quantity.kind not in _POSITIVE:
            return drawn


def _centre(train: Train, quantity: Quantity, truth: Mapping[str, float]) -> tuple[float, float | None]:
    """Return the middle and the standard deviation of what is drawn; None for an angle that can be any."""
    name, value = quantity.name, quantity.value
    if quantity.u:
        return value, quantity.u
    if quantity.kind == "coefficient" and (quantity.is_fitted or _goes_with_temperature(train, quantity)):
        return value, COEFFICIENT_PER_K
    if not quantity.is_fitted:
        return value, 0.0
    if name == _DRIFT:
        return value, DRIFT_PER_H
    if name.endswith(_STRAY):
        middle = value or STRAY_PART * truth[_POWER]
        return middle, STRAY_SPREAD * middle
    spreads = {
        "retardance": RETARDANCE_WAVES,
        "ratio": EXTINCTION_SPREAD,
        "fraction": FRACTION_SPREAD * value,
        "angle": None,
    }
    return value, spreads[quantity.kind]
