"""What moves, flows and warms on a bench, by the name of the instrument that drives it.

It owns that each exists once, whoever looks at it: the instrument's twin writes to it, the world reads it.
"""

import math
from collections.abc import Mapping
from dataclasses import dataclass

from rigctl.files.rig import InstrumentEntry, Rig
from rigctl_sim.keys import CONTROLLER, MOUNT, SLIDE, SOURCE, SWITCH, entries_of, of_twin
from rigctl_sim.machine import Axis, AxisMake
from rigctl_sim.noise import generator
from rigctl_sim.plant import Plant, PlantMake
from rigctl_sim.switch import Mover
from rigctl_sim.trajectory import Trajectory

CLOCKWISE = "clockwise to an eye facing the light"
HOMED_BY_RUN = "at start"
ROOM_C = 22.0
"""Where the rig file does not say how warm the room is; common practice."""
_AT_ONE = {SWITCH: "open", SLIDE: "in"}


@dataclass(frozen=True, slots=True)
class Equipment:
    """Axes, movers of shutters and slides, currents in A and plants, by the name of their instrument."""

    axes: Mapping[str, Axis]
    movers: Mapping[str, Mover]
    currents: Mapping[str, Trajectory]
    plants: Mapping[str, Plant]


def equipment_of(rig: Rig, seed: int) -> Equipment:
    """Make the equipment of a rig, all at rest."""
    return Equipment(
        axes={entry.name: _axis(entry, seed) for entry in entries_of(rig, MOUNT)},
        movers={entry.name: _mover(entry) for entry in entries_of(rig, SWITCH, SLIDE)},
        currents={entry.name: Trajectory(0.0) for entry in entries_of(rig, SOURCE)},
        plants={entry.name: _plant(rig, entry) for entry in entries_of(rig, CONTROLLER)},
    )


def sense_of(entry: InstrumentEntry) -> float:
    """Return -1 for a mount whose dial counts against the bench's sense, else 1."""
    return -1.0 if entry.options["positive"] == CLOCKWISE else 1.0


def room_c(rig: Rig) -> float:
    """Return the temperature of the room, degC."""
    return ROOM_C if rig.room is None else rig.room.temperature_c


def breaks_at_s(rig: Rig, entry: InstrumentEntry, key: str) -> float:
    """Return the instant at which something breaks, s; never, where the rig file does not say."""
    written = of_twin(rig, entry, key)
    return math.inf if written is None else float(written)


def _axis(entry: InstrumentEntry, seed: int) -> Axis:
    """Make an axis that stands at its zero, or anywhere when a run homes it."""
    options, sense = entry.options, sense_of(entry)
    low, high = sorted(sense * end for end in options["travel"])
    make = AxisMake((low, high), options["speed"], options["acceleration"], options["resolution"])
    left_at = 0.0
    if options["homing"] == HOMED_BY_RUN:
        left_at = float(generator(seed, f"{entry.name} left at").uniform(max(low, -180), min(high, 180)))
    return Axis(make, left_at_deg=left_at)


def _mover(entry: InstrumentEntry) -> Mover:
    rests_at_one = entry.options["at rest"] == _AT_ONE[entry.driver]
    return Mover(Trajectory(float(rests_at_one)), rests_at_one, entry.options["moves in"])


def _plant(rig: Rig, entry: InstrumentEntry) -> Plant:
    make = PlantMake(
        ambient_c=room_c(rig),
        time_constant_s=of_twin(rig, entry, "time constant"),
        slew_k_per_s=of_twin(rig, entry, "slew"),
        idle_time_constant_s=of_twin(rig, entry, "idle time constant"),
    )
    return Plant(make, fails_at_s=breaks_at_s(rig, entry, "sensor breaks after"))
