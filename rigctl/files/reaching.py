"""Whether the instruments of a rig reach what a recipe asks of them: angles, temperatures, currents, readings.

It owns the comparison with what drivers declare. What may not be exceeded is another matter: see
`rigctl.runner.limits`.
"""

from collections.abc import Iterator, Mapping
from dataclasses import dataclass

from rigctl.errors import Mistake
from rigctl.files.mistakes import quoted
from rigctl.files.places import Keys
from rigctl.files.recipe import Axis, Recipe
from rigctl.files.rig import InstrumentEntry, Rig
from rigctl.interfaces import (
    Capabilities,
    ControllerCapabilities,
    Driver,
    MeterCapabilities,
    SourceCapabilities,
    StageCapabilities,
)
from rigctl.quantities import format_quantity

OVERSHOOT = 2.0
"""A one-sided approach goes past its angle by so many backlashes and comes back."""
ROUNDING = 1e-9
"""Relative; a dwell of 300 ms in three readings asks for 100 ms, whatever the arithmetic says."""


@dataclass(frozen=True, slots=True)
class _Asked:
    """Values that some part of the recipe asks of a role, lowest and highest, and where it asks."""

    role: str
    low: float
    high: float
    keys: Keys
    axis: Axis | None = None


def unreachable(recipe: Recipe, rig: Rig, drivers: Mapping[str, Driver]) -> Iterator[Mistake]:
    """Yield everything that an instrument of the rig does not reach, at its place in the recipe."""
    able = {name: _capabilities(rig.entry(name), drivers, role.kind) for name, role in recipe.roles.items()}
    for asked in (*_swept(recipe), *_prepared(recipe), *_flipped(recipe)):
        told = _beyond(asked, able[asked.role])
        if told is not None:
            line, column = recipe.place(*asked.keys)
            yield Mistake(recipe.path, line, column, asked.role, told[0], expected=told[1])
    yield from _readings(recipe, able)


def _capabilities(entry: InstrumentEntry | None, drivers: Mapping[str, Driver], kind: str) -> Capabilities | None:
    """What an instrument can do; None where there is none, or one of another kind, which is told elsewhere."""
    if entry is None or drivers[entry.driver].kind != kind:
        return None
    return drivers[entry.driver].capabilities(entry.options)


def _swept(recipe: Recipe) -> Iterator[_Asked]:
    for step_number, step in enumerate(recipe.steps):
        above = (*recipe.keys_of_step(step_number), "sweep")
        for number, axis in enumerate(step.sweep):
            if axis.role:
                keys = (*above, number, axis.role)
                yield _Asked(axis.role, min(axis.values), max(axis.values), keys, axis)


def _prepared(recipe: Recipe) -> Iterator[_Asked]:
    for number, one in enumerate(recipe.preparations):
        yield _Asked(one.role, one.to, one.to, ("prepare", number, one.role, "to"))


def _flipped(recipe: Recipe) -> Iterator[_Asked]:
    """What a rotation stage turns to where it takes an element out of the beam."""
    for number, part in enumerate(recipe.optics):
        if part.taken_out_by is not None and part.in_deg is not None and part.out_deg is not None:
            low, high = sorted((part.in_deg, part.out_deg))
            yield _Asked(part.taken_out_by, low, high, ("optics", number, part.kind, "taken out by"))


def _beyond(asked: _Asked, able: Capabilities | None) -> tuple[str, str] | None:
    """Say what an instrument does not reach, and what was expected; None where it reaches all."""
    match able:
        case StageCapabilities():
            return _beyond_travel(asked, able)
        case ControllerCapabilities():
            low, high = (format_quantity(end, "temperature") for end in able.span_c)
            expected = f"temperatures within its span of {low} to {high}"
            return _outside(asked, able.span_c, "temperature", expected)
        case SourceCapabilities():
            expected = f"at most {format_quantity(able.current_a, 'current')}, which is all that it can drive"
            return _outside(asked, (0.0, able.current_a), "current", expected)
    return None


def _outside(asked: _Asked, span: tuple[float, float], kind: str, expected: str) -> tuple[str, str] | None:
    if asked.low >= span[0] and asked.high <= span[1]:
        return None
    furthest = format_quantity(asked.low if asked.low < span[0] else asked.high, kind)
    return f"{quoted(asked.role)} would have to go to {furthest}", expected


def _beyond_travel(asked: _Asked, stage: StageCapabilities) -> tuple[str, str] | None:
    """Say which end a mount cannot reach, the overshoot of its approach included."""
    approach = "either" if asked.axis is None else asked.axis.approach
    past = OVERSHOOT * stage.backlash_deg
    low = asked.low - (past if approach == "from below" else 0.0)
    high = asked.high + (past if approach == "from above" else 0.0)
    if low >= stage.travel_deg[0] and high <= stage.travel_deg[1]:
        return None
    is_low = low < stage.travel_deg[0]
    furthest = format_quantity(low if is_low else high, "angle")
    is_overshoot = past > 0 and approach == ("from below" if is_low else "from above")
    note = f", as its approach {approach} goes past the angle and back" if is_overshoot else ""
    ends = " to ".join(format_quantity(end, "angle") for end in stage.travel_deg)
    what = f"the mount {quoted(asked.role)} would have to go to {furthest}{note}"
    return what, f"angles within its travel of {ends}"


def _readings(recipe: Recipe, able: Mapping[str, Capabilities | None]) -> Iterator[Mistake]:
    """Compare the length of one reading with what each meter can integrate."""
    aperture_s = recipe.dwell.time_s / recipe.dwell.readings
    for role, meter in able.items():
        if not isinstance(meter, MeterCapabilities):
            continue
        shortest_s, longest_s = meter.aperture_s
        if shortest_s * (1 - ROUNDING) <= aperture_s <= longest_s * (1 + ROUNDING):
            continue
        line, column = recipe.place("dwell", "time")
        what = f"each reading would take {format_quantity(aperture_s, 'time')}"
        ends = " to ".join(format_quantity(end, "time") for end in meter.aperture_s)
        yield Mistake(
            recipe.path,
            line,
            column,
            "time",
            what,
            expected=f"readings of {ends}, as the meter of {quoted(role)} takes",
        )
        return
