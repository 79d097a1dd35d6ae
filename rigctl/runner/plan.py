"""What a recipe asks for, visit by visit, and how long it takes.

Pure: a plan is a function of the recipe, and its duration of the plan and what the instruments declare.
"""

import itertools
import math
from collections.abc import Iterator, Mapping
from dataclasses import dataclass

from rigctl.files.recipe import Axis, Recipe, Step
from rigctl.interfaces import Capabilities, MeterCapabilities, ShutterCapabilities, StageCapabilities
from rigctl.record.layout import AxisLayout, StepLayout
from rigctl.runner.approach import Standing, way_to

DARK_DWELLS = 5
"""Dwells of one dark: with four readings each, its mean is known four times better than one reading."""
SETTLED_PART = 1e-4
"""What may be left of a change when a dwell begins, where no uncertainty is asked for (design section 9)."""
EXCHANGE_S = 0.002
"""An ordinary exchange on a local network; common practice. A visit takes about four."""
SEEN_S = 0.02
"""From the end of a move until the mount is seen at rest, on average; measured on the simulated mounts."""


@dataclass(frozen=True, slots=True)
class Visit:
    """One stop of a sweep: its step, its place in the step's grid, and the angles asked for by role, deg."""

    step: str
    number: int
    index: tuple[int, ...]
    asked_deg: Mapping[str, float]


def step_visits(step: Step) -> Iterator[Visit]:
    """Yield the visits of a step as written: the first axis turns slowest."""
    grid = itertools.product(*(range(len(axis.angles_deg)) for axis in step.sweep))
    for number, index in enumerate(grid):
        asked = {axis.role: axis.angles_deg[at] for axis, at in zip(step.sweep, index, strict=True)}
        yield Visit(step.name, number, index, asked)


def count_visits(recipe: Recipe) -> int:
    """Return the number of visits of a recipe, darks left out."""
    return sum(1 for step in recipe.steps for _ in step_visits(step))


def count_darks(recipe: Recipe) -> int:
    """Return the number of darks of a recipe: each step has its own."""
    return 0 if recipe.dark is None else len(recipe.steps) * (recipe.dark.before + recipe.dark.after)


def _axis_layout(axis: Axis) -> AxisLayout:
    return AxisLayout(f"{axis.role.replace(' ', '_')}_angle", axis.role, "deg", axis.angles_deg)


def step_layouts(recipe: Recipe) -> tuple[StepLayout, ...]:
    """Return the grid of each step as the run file keeps it."""
    return tuple(StepLayout(step.name, tuple(map(_axis_layout, step.sweep))) for step in recipe.steps)


def aperture_s(recipe: Recipe) -> float:
    """Integration time of one reading, s."""
    return recipe.dwell.time_s / recipe.dwell.readings


def settle_s(step: Step, time_constant_s: float) -> float:
    """How long to settle after a move: what is given, or what the slowest meter needs to forget the old level, s.

    Source
    ------
    First-order step response: exp(-t/tau) = SETTLED_PART.
    """
    # 9.2 time constants leave 1e-4 of a change
    needed = time_constant_s * 9.210340371976182
    return max(needed, *(axis.settle_s for axis in step.sweep))


def duration_s(recipe: Recipe, capabilities: Mapping[str, Capabilities]) -> float:
    """Estimate how long a run takes, s; capabilities by role, an unfilled role left out."""
    meters = [c for c in capabilities.values() if isinstance(c, MeterCapabilities)]
    stages = {role: c for role, c in capabilities.items() if isinstance(c, StageCapabilities)}
    shutters = [c for c in capabilities.values() if isinstance(c, ShutterCapabilities)]
    slowest_s = max((tau for meter in meters for tau in meter.time_constant_s), default=0.0)
    standing: dict[str, Standing] = {}
    total = 0.0
    for step in recipe.steps:
        per_visit_s = settle_s(step, slowest_s) + recipe.dwell.time_s + 4 * EXCHANGE_S
        total += _moves_s(step, stages, standing) + math.prod(len(axis.angles_deg) for axis in step.sweep) * per_visit_s
    dark_s = settle_s(recipe.steps[0], slowest_s) + DARK_DWELLS * (recipe.dwell.time_s + 2 * EXCHANGE_S)
    # the shutter is told at the start, before each step, at each dark and at the end
    moves = 2 + len(recipe.steps) + count_darks(recipe)
    return total + count_darks(recipe) * dark_s + moves * sum(shutter.moves_in_s for shutter in shutters)


def _moves_s(step: Step, stages: Mapping[str, StageCapabilities], standing: dict[str, Standing]) -> float:
    """How long the mounts turn in a step, s; brings where each of them stands up to date."""
    total = 0.0
    for visit in step_visits(step):
        moves = [_move_s(visit.asked_deg[axis.role], axis, stages[axis.role], standing) for axis in step.sweep]
        total += max(moves)
    return total


def _move_s(target_deg: float, axis: Axis, stage: StageCapabilities, standing: dict[str, Standing]) -> float:
    before = standing.get(axis.role)
    total, here = 0.0, 0.0 if before is None else before.angle_deg
    for point in way_to(target_deg, axis.approach, standing=before, backlash_deg=stage.backlash_deg):
        total += stage.travel_time_s(point - here) + SEEN_S
        here = point
    standing[axis.role] = Standing(target_deg, axis.approach)
    return total
