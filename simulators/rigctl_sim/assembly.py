"""Puts a simulated bench together: its hidden truth, and the world in which its equipment stands.

It owns which element hangs on which mount, slide and oven. It knows no wire.
"""

from collections.abc import Mapping
from dataclasses import dataclass, replace

from rigctl.files.arrangement import train_of
from rigctl.files.labels import STEP, level_labels
from rigctl.files.recipe import OpticalElement, Recipe
from rigctl.files.rig import InstrumentEntry, Rig
from rigctl.optics import Train, reader
from rigctl_sim.equipment import Equipment, equipment_of, room_c, sense_of
from rigctl_sim.keys import METER, MOUNT, SLIDE, SWITCH, entries_of, of_bench, of_twin
from rigctl_sim.light_source import Driven, Emission, Source, Steady
from rigctl_sim.operating_point import diode_of
from rigctl_sim.presence import Carried, Flipped, Holder, Presence
from rigctl_sim.source_noise import SourceNoise
from rigctl_sim.truth import draw_truth, truth_at_levels
from rigctl_sim.world import Mount, Way, World

POWER, DRIFT = "source.power", "source.drift"


@dataclass(frozen=True, slots=True)
class Assembly:
    """A bench without its wires."""

    recipe: Recipe
    rig: Rig
    seed: int
    train: Train
    equipment: Equipment
    truth: Mapping[str, float]
    world: World


def assemble(recipe: Recipe, rig: Rig, seed: int) -> Assembly:
    """Draw the truth of a bench and put its world together."""
    train, equipment = train_of(recipe, filled=rig.roles), equipment_of(rig, seed)
    power = recipe.source.power
    truth = draw_truth(train, seed, given=_given(recipe, rig), power_u_w=None if power is None else power.u)
    source = Source(
        _emission(recipe, rig, equipment, power_w=truth[POWER], seed=seed),
        truth[DRIFT],
        SourceNoise(seed, of_bench(rig, "source noise")),
    )
    world = World(source, reader(train, truth), _way(recipe, rig, equipment))
    levelled = truth | truth_at_levels(train, truth, _levels(recipe))
    return Assembly(recipe, rig, seed, train, equipment, levelled, world)


def roles_of(recipe: Recipe, rig: Rig, entry: InstrumentEntry) -> list[str]:
    """Return the recipe's roles that an instrument fills."""
    return [role for role, name in rig.roles.items() if name == entry.name and role in recipe.roles]


def _given(recipe: Recipe, rig: Rig) -> dict[str, float]:
    """Return what the rig file says of the truth."""
    given = {name: of_bench(rig, key) for key, name in (("power", POWER), ("drift", DRIFT))}
    for entry in entries_of(rig, METER):
        for role in roles_of(recipe, rig, entry):
            given[f"{role}.stray light"] = of_twin(rig, entry, "stray light")
    return {name: value for name, value in given.items() if value is not None}


def _levels(recipe: Recipe) -> dict[str, dict[str, float | None]]:
    """Return the levels that the recipe's steps have: by role or `step`, with the temperature where it is one."""
    found: dict[str, dict[str, float | None]] = {STEP: {step.name: None for step in recipe.steps}}
    for step in recipe.steps:
        for axis in step.sweep:
            for value in axis.values:
                label = level_labels(replace(step, sweep=(axis,)), {axis.role: value}).get(axis.role)
                if label is not None:
                    found.setdefault(axis.role, {})[label] = value if axis.kind == "temperature" else None
    return found


def _emission(recipe: Recipe, rig: Rig, equipment: Equipment, *, power_w: float, seed: int) -> Emission:
    """Return a diode where the rig has a source that drives it, else a source of its own."""
    driver = _filled(rig, recipe.source.driven_by)
    if driver is None:
        return Steady(power_w)
    cooler = _filled(rig, recipe.source.cooled_by)
    ambient_c = room_c(rig)
    return Driven(
        diode_of(recipe, rig, driver, power_w=power_w, seed=seed),
        equipment.currents[driver.name],
        (lambda _: ambient_c) if cooler is None else equipment.plants[cooler.name],
    )


def _way(recipe: Recipe, rig: Rig, equipment: Equipment) -> Way:
    mounts = {
        role: Mount(equipment.axes[entry.name].dial, sense_of(entry))
        for entry in entries_of(rig, MOUNT)
        for role in roles_of(recipe, rig, entry)
    }
    shutters = [equipment.movers[entry.name].place for entry in entries_of(rig, SWITCH) if roles_of(recipe, rig, entry)]
    holders = {part.name: holder for part in recipe.optics if (holder := _holder(part, rig, equipment))}
    warm = {role: _filled(rig, role) for part in recipe.optics if (role := part.warmed_by)}
    plants = {role: equipment.plants[entry.name] for role, entry in warm.items() if entry is not None}
    return Way(mounts, shutters, Presence(holders), plants)


def _holder(part: OpticalElement, rig: Rig, equipment: Equipment) -> Holder | None:
    """Return what takes an element out of the beam, where an instrument does."""
    entry = _filled(rig, part.taken_out_by)
    if entry is None:
        return None
    if entry.driver == SLIDE:
        return Carried(equipment.movers[entry.name].place)
    assert part.in_deg is not None
    assert part.out_deg is not None
    return Flipped(equipment.axes[entry.name].dial, sense_of(entry), part.in_deg, part.out_deg)


def _filled(rig: Rig, role: str | None) -> InstrumentEntry | None:
    return None if role is None else rig.entry(role)
