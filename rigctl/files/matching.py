"""Whether a rig can do what a recipe asks for.

It owns which instrument stands for which role, and the order of the checks between the two files; it opens no
instrument. Limits are no business of it: the runner holds them wherever a setpoint passes.
"""

from collections.abc import Iterator, Mapping

from rigctl.errors import FileError, Mistake
from rigctl.files.mistakes import nearest_word, quoted
from rigctl.files.reaching import unreachable
from rigctl.files.recipe import Recipe
from rigctl.files.rig import Rig
from rigctl.interfaces import Driver


def match(recipe: Recipe, rig: Rig, drivers: Mapping[str, Driver]) -> None:
    """Compare a recipe with a rig; raises `FileError` with places in either file."""
    mistakes = [
        *_unfilled(recipe, rig),
        *_filled_twice(recipe, rig),
        *_wrong_kinds(recipe, rig, drivers),
        *_without_diode(recipe, rig, drivers),
    ]
    mistakes += unreachable(recipe, rig, drivers)
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


def _filled_twice(recipe: Recipe, rig: Rig) -> Iterator[Mistake]:
    """An instrument may fill roles of several recipes, but not two of one."""
    filled: dict[str, str] = {}
    for role, name in rig.roles.items():
        if role not in recipe.roles:
            continue
        if name in filled:
            line, column = rig.place("roles", role)
            what = f"{quoted(name)} fills the role {quoted(filled[name])} already"
            yield Mistake(rig.path, line, column, role, what, expected=f"one role each, as {recipe.path} needs both")
        filled[name] = role


def _wrong_kinds(recipe: Recipe, rig: Rig, drivers: Mapping[str, Driver]) -> Iterator[Mistake]:
    for name, role in recipe.roles.items():
        entry = rig.entry(name)
        kind = role.kind if entry is None else drivers[entry.driver].kind
        if entry is not None and kind != role.kind:
            line, column = rig.place("roles", name)
            what = f"{quoted(entry.name)} fills the role {quoted(name)} but is a {kind}"
            yield Mistake(rig.path, line, column, name, what, expected=f"a {role.kind}, as {recipe.path} asks")


def _without_diode(recipe: Recipe, rig: Rig, drivers: Mapping[str, Driver]) -> Iterator[Mistake]:
    """Whatever drives a diode must tell which: without it, nobody knows what it may not exceed."""
    for name, role in recipe.roles.items():
        entry = rig.entry(name)
        if entry is None or role.kind != "current source" or drivers[entry.driver].kind != role.kind:
            continue
        if rig.diode(name) is None:
            line, column = rig.place("roles", name)
            what = f"no diode stands on {quoted(entry.name)}, so its limits are not known"
            expected = f"an entry under 'diodes' with 'on: {entry.name}' and its limits"
            yield Mistake(rig.path, line, column, name, what, expected=expected)
