"""What a recipe asks for, visit by visit, in the order in which it is done.

Pure: a plan is a function of the recipe.
"""

import itertools
import math
import random
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass

from rigctl.files.recipe import Axis, Order, Recipe, Step
from rigctl.record.layout import REPEAT, AxisLayout, StepLayout

DARK_DWELLS = 5
"""Dwells of one dark: with four readings each, its mean is known four times better than one reading."""
TIME_CONSTANTS = math.log(1e4)
"""So many time constants leave a ten-thousandth of a change, where nobody asks for better."""
UNITS = {"angle": "deg", "temperature": "degC", "current": "A", REPEAT: "1"}


@dataclass(frozen=True, slots=True)
class Visit:
    """One stop of a sweep: its step, its place in the step's grid, and what is asked for by role (or `repeat`).

    Angles in deg, temperatures in degC, currents in A; a repeat counts from 1.
    """

    step: str
    number: int
    index: tuple[int, ...]
    asked: Mapping[str, float]


def axis_name(axis: Axis) -> str:
    """Return the role of an axis, or `repeat`."""
    return axis.role or REPEAT


def ordered(count: int, order: Order) -> Sequence[int]:
    """Return the places of the fastest axis in the order of their visits.

    `interleaved k` takes every k-th, then those between; `shuffled` is one of all orders, drawn by its number.
    """
    places = list(range(count))
    if order.kind == "interleaved":
        return [place for first in range(order.number) for place in places[first :: order.number]]
    if order.kind == "shuffled":
        random.Random(order.number).shuffle(places)
    return places


def step_visits(step: Step) -> Iterator[Visit]:
    """Yield the visits of a step: the first axis turns slowest, the last one in the step's order."""
    sizes = [len(axis.values) for axis in step.sweep]
    slow, fast = [range(size) for size in sizes[:-1]], ordered(sizes[-1], step.order)
    for index in itertools.product(*slow, fast):
        asked = {axis_name(axis): axis.values[at] for axis, at in zip(step.sweep, index, strict=True)}
        yield Visit(step.name, _flat(index, sizes), index, asked)


def _flat(index: Sequence[int], sizes: Sequence[int]) -> int:
    number = 0
    for at, size in zip(index, sizes, strict=True):
        number = number * size + at
    return number


def count_visits(recipe: Recipe) -> int:
    """Return the number of visits of a recipe, darks left out."""
    total = 0
    for step in recipe.steps:
        in_step = 1
        for axis in step.sweep:
            in_step *= len(axis.values)
        total += in_step
    return total


def _axis_layout(axis: Axis) -> AxisLayout:
    name = REPEAT if axis.kind == REPEAT else f"{axis.role.replace(' ', '_')}_{axis.kind}"
    return AxisLayout(name, axis_name(axis), UNITS[axis.kind], axis.values)


def step_layouts(recipe: Recipe) -> tuple[StepLayout, ...]:
    """Return the grid of each step as the run file keeps it."""
    return tuple(StepLayout(step.name, tuple(map(_axis_layout, step.sweep))) for step in recipe.steps)


def aperture_s(recipe: Recipe) -> float:
    """Integration time of one reading, s."""
    return recipe.dwell.time_s / recipe.dwell.readings


def settle_s(step: Step, time_constant_s: float) -> float:
    """How long to settle after a move, s: what is given, or what the slowest meter needs to forget the old level.

    Source
    ------
    First-order step response: exp(-t / time constant) of a change is left after t.
    """
    return max([TIME_CONSTANTS * time_constant_s, *(axis.settle_s for axis in step.sweep)])
