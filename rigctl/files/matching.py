"""Whether a rig can do what a recipe asks for.

It owns the checks between the two files; it opens no instrument.
"""

from collections.abc import Iterator, Mapping

from rigctl.errors import FileError, Mistake
from rigctl.files.mistakes import nearest_word, quoted
from rigctl.files.recipe import Axis, Recipe
from rigctl.files.rig import Rig
from rigctl.interfaces import Driver, StageCapabilities
from rigctl.quantities import format_quantity

OVERSHOOT = 2.0
"""A one-sided approach goes past its angle by so many backlashes and comes back."""


def match(recipe: Recipe, rig: Rig, drivers: Mapping[str, Driver]) -> None:
    """Compare a recipe with a rig; raises `FileError` with places in either file."""
    mistakes = [*_unfilled(recipe, rig), *_wrong_kinds(recipe, rig, drivers), *_too_far(recipe, rig, drivers)]
    if mistakes:
        raise FileError(mistakes)


def _unfilled(recipe: Recipe, rig: Rig) -> Iterator[Mistake]:
    for name, role in recipe.roles.items():
        if name not in rig.roles and not role.is_optional:
            line, column = recipe.places.of_key("roles", name)
            near = nearest_word(name, [r for r in rig.roles if r not in recipe.roles])
            what = f"the rig {quoted(rig.title)} fills the role {quoted(name)} with nothing"
            expected = f"a {role.kind} for it under 'roles' in {rig.path}"
            yield Mistake(recipe.path, line, column, name, what, expected=expected, nearest=near)


def _wrong_kinds(recipe: Recipe, rig: Rig, drivers: Mapping[str, Driver]) -> Iterator[Mistake]:
    for name, role in recipe.roles.items():
        entry = rig.entry(name)
        kind = role.kind if entry is None else drivers[entry.driver].kind
        if entry is not None and kind != role.kind:
            line, column = rig.place("roles", name)
            what = f"{quoted(entry.name)} fills the role {quoted(name)} but is a {kind}"
            yield Mistake(rig.path, line, column, name, what, expected=f"a {role.kind}, as {recipe.path} asks")


def _too_far(recipe: Recipe, rig: Rig, drivers: Mapping[str, Driver]) -> Iterator[Mistake]:
    for step_number, step in enumerate(recipe.steps):
        for axis_number, axis in enumerate(step.sweep):
            stage = _stage(axis.role, rig, drivers)
            what = "" if stage is None else _beyond(axis, stage)
            if stage is None or not what:
                continue
            low, high = (format_quantity(end, "angle") for end in stage.travel_deg)
            above = ("sweep",) if recipe.places.has("sweep") else ("steps", step_number, "sweep")
            line, column = recipe.place(*above, axis_number, axis.role)
            expected = f"angles within its travel of {low} to {high}"
            yield Mistake(recipe.path, line, column, axis.role, what, expected=expected)


def _stage(role: str, rig: Rig, drivers: Mapping[str, Driver]) -> StageCapabilities | None:
    """What the mount of a role can do; None where something else, or nothing, fills the role."""
    entry = rig.entry(role)
    capabilities = None if entry is None else drivers[entry.driver].capabilities(entry.options)
    return capabilities if isinstance(capabilities, StageCapabilities) else None


def _beyond(axis: Axis, stage: StageCapabilities) -> str:
    """Say which end of an axis a mount cannot reach; empty where it reaches all."""
    past = OVERSHOOT * stage.backlash_deg
    low = min(axis.values) - (past if axis.approach == "from below" else 0.0)
    high = max(axis.values) + (past if axis.approach == "from above" else 0.0)
    if low >= stage.travel_deg[0] and high <= stage.travel_deg[1]:
        return ""
    is_low = low < stage.travel_deg[0]
    furthest = format_quantity(low if is_low else high, "angle")
    is_overshoot = past > 0 and axis.approach == ("from below" if is_low else "from above")
    note = f", as its approach {axis.approach} goes past the angle and back" if is_overshoot else ""
    return f"the mount {quoted(axis.role)} would have to go to {furthest}{note}"
