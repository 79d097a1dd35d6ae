"""Loads what a command names, and matches it: every mistake is told before anything is sent."""

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

from rigctl.errors import UsageError

if TYPE_CHECKING:
    from rigctl.files.recipe import Recipe
    from rigctl.files.rig import Rig
    from rigctl.interfaces import BenchFactory, Driver


@dataclass(frozen=True, slots=True)
class Loaded:
    """A recipe with a rig that fits it, and the drivers that the rig names."""

    recipe: "Recipe"
    rig: "Rig"
    drivers: "Mapping[str, Driver]"
    factory: "BenchFactory"


def load(recipe_path: Path, rig_path: Path | None) -> Loaded:
    """Load a recipe and a rig (None: a well-behaved simulated one) and match them."""
    from rigctl.files import load_recipe, load_rig, match, parse_rig
    from rigctl.files.ready import recipe_path as ready_recipe
    from rigctl.files.ready import rig_path as ready_rig
    from rigctl.plugins import find_bench_factory, find_drivers

    drivers, factory = find_drivers(), find_bench_factory()
    recipe = load_recipe(ready_recipe(recipe_path))
    if rig_path is not None:
        rig = load_rig(ready_rig(rig_path), drivers, factory)
    else:
        text = factory.default_rig({name: role.kind for name, role in recipe.roles.items()})
        rig = parse_rig(text, "the default rig", drivers, factory)
    match(recipe, rig, drivers)
    return Loaded(recipe, rig, drivers, factory)


def free_path(out: Path | None, stem: str) -> Path:
    """Return where a new run file goes: `out` itself, or a new name in it where it is a folder.

    Raises
    ------
    UsageError
        When `out` exists as a file, or its folder does not exist: a file is never overwritten.
    """
    if out is not None and not out.is_dir():
        if out.exists():
            raise UsageError(f"{out} exists, and a run file is never overwritten", do="Give another --out.")
        if not out.parent.is_dir():
            raise UsageError(f"the folder {out.parent} does not exist", do="Make it, or give another --out.")
        return out
    folder = out or Path()
    names = (folder / (f"{stem}.h5" if count == 1 else f"{stem}-{count}.h5") for count in range(1, 100_000))
    return next(path for path in names if not path.exists() and not Path(f"{path}.journal").exists())
