"""What is refused before anything is opened: setpoints beyond a limit, and hands where nobody is.

It owns that a run asks for nothing that it cannot have; it sends nothing.
"""

from collections.abc import Mapping

from rigctl.errors import PlanError
from rigctl.files.recipe import Recipe
from rigctl.files.rig import Rig
from rigctl.interfaces import Driver
from rigctl.runner import darks, presence
from rigctl.runner.bench import filled_roles
from rigctl.runner.limits import refuse_beyond_limits


def refuse_beforehand(recipe: Recipe, rig: Rig, drivers: Mapping[str, Driver], *, is_somebody_there: bool) -> None:
    """Refuse what cannot be done on a rig as it is written.

    Errors
    ------
    `LimitError` for setpoints beyond a limit; `PlanError` for what needs hands where nobody can be asked.
    """
    refuse_beyond_limits(recipe, rig, drivers)
    if is_somebody_there:
        return
    presence.refuse_without_hands(recipe, rig)
    has_shutter = any(recipe.roles[role].kind == "shutter" for role in filled_roles(recipe, rig))
    if darks.needs_hands(recipe, has_shutter=has_shutter):
        raise PlanError(
            "its darks are taken by hand, and nobody can be asked: this is no terminal",
            where=recipe.path,
            do="Run it at a terminal, or give the rig a shutter and the recipe `dark: {by: shutter}`.",
        )
