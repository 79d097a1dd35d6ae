"""From the file of a recipe to a checked `Recipe`.

It owns the order of the checks and the way from what is written to what is meant.
"""

import math
from collections.abc import Iterator
from pathlib import Path

from rigctl.errors import QuantityError
from rigctl.files.document import Document, parse_document, read_document
from rigctl.files.leaves import WAVELENGTH
from rigctl.files.mistakes import Mistakes
from rigctl.files.optics_reading import element_of
from rigctl.files.recipe import (
    AXIS_KINDS,
    BY_HAND,
    Axis,
    AxisKind,
    Dark,
    DarkKind,
    DwellPlan,
    Preparation,
    Recipe,
    Role,
    Source,
    Steady,
    Step,
)
from rigctl.files.references import check_references
from rigctl.files.shape import shaped
from rigctl.files.wishes import read_wishes
from rigctl.files.written_recipe import GO_ON, WrittenRecipe, WrittenRole, WrittenStep, WrittenUnlit
from rigctl.files.written_sweep import KINDS, REPEAT, Sweep, WrittenAxis, WrittenSteady
from rigctl.quantities import parse_measured

MOST_VISITS = 1_000_000
"""At one second a visit eleven days; a step that asks for more is a slip."""
UNNAMED_STEP = "data"
"""The step of a recipe that has a sweep and no steps."""


def load_recipe(path: Path) -> Recipe:
    """Read a recipe; raises `FileError` with every mistake of it."""
    mistakes = Mistakes(str(path))
    return _recipe(read_document(path, mistakes), mistakes)


def parse_recipe(text: str, path_name: str) -> Recipe:
    """Read a recipe from a text that is not in a file of its own, such as one kept in a run file."""
    mistakes = Mistakes(path_name)
    return _recipe(parse_document(text, mistakes), mistakes)


def _recipe(document: Document, mistakes: Mistakes) -> Recipe:
    """Check a document and make a recipe of it."""
    wavelength_m = _wavelength_m(document)
    context = {WAVELENGTH: wavelength_m, KINDS: _axis_kinds(document)}
    written = shaped(WrittenRecipe, document, mistakes, context=context)
    check_references(document, mistakes)
    wishes = read_wishes(document, mistakes, wavelength_m=wavelength_m)
    mistakes.raise_if_any()
    if written is None:
        mistakes.refuse("is no recipe")
    recipe = Recipe(
        title=written.recipe,
        roles={name: Role(role.kind, role.optional) for name, role in written.roles.items()},
        source=_source(written),
        optics=tuple(map(element_of, written.optics)),
        preparations=tuple(_preparations(written)),
        steps=_steps(written),
        dwell=DwellPlan(written.dwell.time, round(written.dwell.at_least)),
        darks=tuple(_darks(written)),
        tolerances=wishes.tolerances,
        targets=wishes.targets,
        text=document.text,
        path=document.path,
        sha256=document.sha256,
        places=document.places,
    )
    _check_sizes(recipe, mistakes)
    mistakes.raise_if_any()
    return recipe


def _check_sizes(recipe: Recipe, mistakes: Mistakes) -> None:
    """Refuse steps that nobody could live to see end, and strides that pass over everything."""
    for number, step in enumerate(recipe.steps):
        keys, along = recipe.keys_of_step(number), len(step.sweep[-1].values)
        count = math.prod(len(axis.values) for axis in step.sweep)
        if count > MOST_VISITS:
            expected = f"at most {MOST_VISITS} in a step"
            mistakes.add(recipe.place(*keys, "sweep"), "sweep", f"the sweep makes {count} visits", expected=expected)
        if step.order.kind == "interleaved" and step.order.number > along:
            what = f"a stride of {step.order.number} passes over all {along} values of the last axis"
            mistakes.add(recipe.place(*keys, "order"), "order", what, expected=f"interleaved {along} or less")


def _wavelength_m(document: Document) -> float | None:
    """Wavelength as far as it can be read, so that a retardance in nm makes sense."""
    source = document.data.get("source")
    text = source.get("wavelength") if isinstance(source, dict) else None
    try:
        return parse_measured(text, "length").value if isinstance(text, str) else None
    except QuantityError:
        return None


def _axis_kinds(document: Document) -> dict[str, AxisKind]:
    """What each role sets, as far as it can be read, so that the values of a sweep make sense."""
    roles = document.data.get("roles")
    if not isinstance(roles, dict):
        return {}
    kinds = {name: role.get("is") if isinstance(role, dict) else role for name, role in roles.items()}
    by_text: dict[str, AxisKind] = {str(kind): axis for kind, axis in AXIS_KINDS.items()}
    return {name: by_text[kind] for name, kind in kinds.items() if isinstance(kind, str) and kind in by_text}


def _source(written: WrittenRecipe) -> Source:
    source = written.source
    return Source(source.wavelength, source.power, source.drift, source.driven_by, source.cooled_by)


def _preparations(written: WrittenRecipe) -> Iterator[Preparation]:
    for entry in written.prepare or ():
        for role, one in entry.items():
            yield Preparation(role, one.to, _steady(one.steady), one.ramp, one.warm_up)


def _steps(written: WrittenRecipe) -> tuple[Step, ...]:
    if written.sweep is not None:
        return (Step(UNNAMED_STEP, _axes(written.sweep, written.roles)),)
    return tuple(_step(step, written.roles) for step in written.steps or ())


def _step(step: WrittenStep, roles: dict[str, WrittenRole]) -> Step:
    is_going_on = step.unattended == GO_ON
    return Step(step.name, _axes(step.sweep, roles), step.order, tuple(step.without), is_going_on)


def _axes(sweep: Sweep, roles: dict[str, WrittenRole]) -> tuple[Axis, ...]:
    return tuple(_axis(role, axis, roles) for one in sweep for role, axis in one.items())


def _axis(role: str, axis: WrittenAxis, roles: dict[str, WrittenRole]) -> Axis:
    if role == REPEAT:
        return Axis("", "repeat", axis.stops("repeat"))
    kind = AXIS_KINDS[roles[role].kind]
    return Axis(role, kind, axis.stops(kind), axis.approach, axis.settle, _steady(axis.steady), axis.ramp)


def _steady(steady: WrittenSteady | None) -> Steady | None:
    return None if steady is None else Steady(steady.within, steady.for_, steady.give_up_after, steady.slope)


def _darks(written: WrittenRecipe) -> Iterator[Dark]:
    by = "" if written.dark is None else written.dark.by
    kinds: tuple[tuple[DarkKind, str, WrittenUnlit | None], ...] = (
        ("dark", by, written.dark),
        ("background", "", written.background),
        ("zero", BY_HAND, written.zero),
    )
    for kind, by, unlit in kinds:
        if unlit is not None:
            yield Dark(kind, by, unlit.before, unlit.after, unlit.every)
