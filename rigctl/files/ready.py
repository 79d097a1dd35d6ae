"""The recipes and rig files that come with polrig: in a checkout, or where a wheel put them.

It owns where they are; it reads none of them.
"""

import sysconfig
from pathlib import Path

from rigctl.errors import UsageError


def ready_folder() -> Path:
    """Return the folder of the ready recipes: that of the checkout where there is one, else the installed one."""
    checkout = Path(__file__).resolve().parents[2] / "recipes"
    return checkout if checkout.is_dir() else Path(sysconfig.get_path("data")) / "share" / "polrig" / "recipes"


def ready_names(folder: Path) -> list[str]:
    """Return the names under which the files of a folder can be called."""
    return sorted(path.stem for path in folder.glob("*.yaml"))


def recipe_path(given: Path) -> Path:
    """Return a recipe's path: the file itself, or the ready recipe of that name."""
    return _found(given, ready_folder(), "recipe")


def rig_path(given: Path) -> Path:
    """Return a rig file's path: the file itself, or the ready rig file of that name."""
    return _found(given, ready_folder() / "rigs", "rig file")


def _found(given: Path, folder: Path, what: str) -> Path:
    if given.exists() or given.suffix or len(given.parts) > 1:
        return given
    ready = folder / f"{given}.yaml"
    if not ready.is_file():
        names = ", ".join(ready_names(folder)) or "none"
        raise UsageError(f"there is no file '{given}', and no ready {what} of that name", do=f"Ready: {names}.")
    return ready
