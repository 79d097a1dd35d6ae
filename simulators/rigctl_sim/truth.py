"""The hidden truth of a simulated bench: a value for every quantity of the train, drawn from a seed.

It owns the rules of drawing; it knows no instrument. Each quantity is drawn on its own, so that one more in
the recipe leaves the others as they were.
"""

import math
from collections.abc import Mapping
from dataclasses import replace

from rigctl.optics import Quantity, Train
from rigctl_sim.noise import generator

POWER_SPREAD = 0.1
"""Relative; what a source is off when nobody says better. This and what follows are usual on such benches."""
DRIFT_PER_H = 0.002
STRAY_PART = 0.0005
STRAY_SPREAD = 0.3
RETARDANCE_WAVES = 0.01
EXTINCTION_SPREAD = 0.3
_POWER, _DRIFT, _STRAY, _OFFSET = "source.power", "source.drift", ".stray light", ".dial offset"
_POSITIVE = ("ratio", "power")


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
            truth[quantity.name] = _drawn(quantity, seed, truth) if chosen is None else chosen
    return truth


def _drawn(quantity: Quantity, seed: int, truth: Mapping[str, float]) -> float:
    value, spread = _centre(quantity, truth)
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


def _centre(quantity: Quantity, truth: Mapping[str, float]) -> tuple[float, float | None]:
    """Return the middle and the standard deviation of what is drawn; None for an angle that can be any."""
    name, value = quantity.name, quantity.value
    if quantity.u:
        return value, quantity.u
    if not quantity.is_fitted:
        return value, 0.0
    if name == _DRIFT:
        return value, DRIFT_PER_H
    if name.endswith(_STRAY):
        middle = value or STRAY_PART * truth[_POWER]
        return middle, STRAY_SPREAD * middle
    return value, {"retardance": RETARDANCE_WAVES, "ratio": EXTINCTION_SPREAD, "angle": None}[quantity.kind]
