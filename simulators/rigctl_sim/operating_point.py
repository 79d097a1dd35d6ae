"""The laser diode of a recipe: what it emits where the recipe prepares it.

It owns how current and temperature are found in a recipe, and what is drawn of a diode.
"""

from collections.abc import Iterator
from itertools import chain

from rigctl.errors import PlanError
from rigctl.files.recipe import Recipe
from rigctl.files.rig import InstrumentEntry, Rig
from rigctl_sim.diode import Diode
from rigctl_sim.equipment import room_c
from rigctl_sim.keys import of_twin
from rigctl_sim.noise import generator

THRESHOLD_PART = (0.47, 0.53)
"""Of the prepared current; an AlGaAs diode at half to two thirds of its rated power. Common practice."""
CHARACTERISTIC_K = (120.0, 160.0)
"""Of AlGaAs; public tables."""


def diode_of(recipe: Recipe, rig: Rig, source: InstrumentEntry, *, power_w: float, seed: int) -> Diode:
    """Return a diode that emits a power at the current and the temperature at which the recipe prepares it.

    Raises
    ------
    PlanError
        When the rig file wants its threshold where the diode already emits.
    """
    current_a = prepared_current_a(recipe)
    drawn = generator(seed, f"truth of the diode on {source.name}")
    threshold_a, characteristic_k = drawn.uniform(*THRESHOLD_PART) * current_a, drawn.uniform(*CHARACTERISTIC_K)
    given_a, given_k = of_twin(rig, source, "threshold"), of_twin(rig, source, "characteristic temperature")
    diode = Diode(
        power_w=power_w,
        current_a=current_a,
        temperature_c=prepared_temperature_c(recipe, rig),
        threshold_a=float(threshold_a) if given_a is None else given_a,
        characteristic_k=float(characteristic_k) if given_k is None else given_k,
    )
    if not 0.0 < diode.threshold_a < current_a:
        raise PlanError(
            f"the simulated diode on '{source.name}' has its threshold at {1e3 * diode.threshold_a:.4g} mA, but is "
            f"used at {1e3 * current_a:.4g} mA",
            where=rig.path,
            do="Give a threshold below the current of the recipe, or none.",
        )
    return diode


def prepared_current_a(recipe: Recipe) -> float:
    """Return the current at which the source has its power: as prepared, else the largest of the sweeps, A."""
    role = recipe.source.driven_by
    return next(_prepared(recipe, role), 0.0) or max(_swept(recipe, role))


def prepared_temperature_c(recipe: Recipe, rig: Rig) -> float:
    """Return the temperature at which the source has its power, degC.

    As prepared, else the first of the sweeps; without anything that cools it, that of the room.
    """
    role = recipe.source.cooled_by
    if role is None or rig.entry(role) is None:
        return room_c(rig)
    return next(chain(_prepared(recipe, role), _swept(recipe, role)))


def _prepared(recipe: Recipe, role: str | None) -> Iterator[float]:
    return (prepared.to for prepared in recipe.preparations if prepared.role == role)


def _swept(recipe: Recipe, role: str | None) -> Iterator[float]:
    axes = (axis for step in recipe.steps for axis in step.sweep)
    return (value for axis in axes if axis.role == role for value in axis.values)
