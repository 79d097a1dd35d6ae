"""The whole job of a night: a recipe and a rig with everything that may stand in one."""

from pathlib import Path

from files_cases import NOTHING, Changes, replaced

from rigctl.files import parse_recipe, parse_rig
from rigctl.files.recipe import Recipe
from rigctl.files.rig import Rig
from rigctl.plugins import find_drivers

EXAMPLES = Path(__file__).parent / "examples"
NIGHT = (EXAMPLES / "half-wave-plate.yaml").read_text(encoding="utf-8")
BENCH = (EXAMPLES / "bench-2.yaml").read_text(encoding="utf-8")


def night(changes: Changes = NOTHING) -> Recipe:
    """Read the whole recipe after some pieces of it were replaced."""
    return parse_recipe(replaced(NIGHT, changes), "n.yaml")


def bench(changes: Changes = NOTHING) -> Rig:
    """Read the whole rig file after some pieces of it were replaced; its simulated section is not looked at."""
    return parse_rig(replaced(BENCH, changes), "b.yaml", find_drivers(), None)
