"""`polrig run`: the real run."""

from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from rigctl.cli.options import AsJson, Out, RecipePath, Trace
from rigctl.errors import PlanError

if TYPE_CHECKING:
    from rigctl.cli.loading import Loaded

NAME = "run"


def command(
    recipe: RecipePath,
    rig: Annotated[Path, typer.Option(help="Rig file: which instruments, and where they are reached.")],
    out: Out = None,
    part: Annotated[str, typer.Option(help="Serial number of the part.")] = "",
    operator: Annotated[str, typer.Option(help="Who runs it.")] = "",
    arm: Annotated[bool, typer.Option("--arm", help="It may emit: do not ask for leave.")] = False,
    trace: Trace = None,
    as_json: AsJson = False,
) -> int:
    """Do the real run, then fit what it recorded."""
    from rigctl.cli.arming import arm_or_refuse
    from rigctl.cli.console import progress_for_stream
    from rigctl.cli.ending import tell_outcome
    from rigctl.cli.loading import free_path, load
    from rigctl.cli.person import PersonAtTerminal, is_somebody_there
    from rigctl.cli.signals import stopping_on_signals
    from rigctl.cli.tracing import tapping
    from rigctl.runner.bench import emitting_roles
    from rigctl.runner.hardware import real_job
    from rigctl.runner.limits import refuse_beyond_limits
    from rigctl.runner.person import NobodyThere
    from rigctl.runner.run import run_job
    from rigctl.timeline import StopRequest

    loaded = load(recipe, rig)
    refuse_beyond_limits(loaded.recipe, loaded.rig, loaded.drivers)
    _refuse_without_hands(loaded)
    if emitting_roles(loaded.recipe, loaded.rig):
        arm_or_refuse(loaded.recipe, loaded.rig, is_armed=arm)
    path = free_path(out, recipe.stem)
    stop, progress = StopRequest(), progress_for_stream()
    with stopping_on_signals(stop), tapping(trace) as wrap:
        job = real_job(
            loaded.recipe,
            loaded.rig,
            drivers=loaded.drivers,
            path=path,
            person=PersonAtTerminal(stop) if is_somebody_there() else NobodyThere(),
            progress=progress,
            stop=stop,
            operator=operator,
            part=part,
            wrap=wrap,
        )
        outcome = run_job(job)
    progress.end()
    return tell_outcome(job, outcome, f"ran '{loaded.recipe.title}'", as_json=as_json)


def _refuse_without_hands(loaded: "Loaded") -> None:
    """Refuse what needs hands where nobody can be asked for them."""
    from rigctl.cli.person import is_somebody_there
    from rigctl.runner.bench import filled_roles
    from rigctl.runner.darks import needs_hands
    from rigctl.runner.presence import refuse_without_hands

    if is_somebody_there():
        return
    recipe = loaded.recipe
    refuse_without_hands(recipe, loaded.rig)
    has_shutter = any(recipe.roles[role].kind == "shutter" for role in filled_roles(recipe, loaded.rig))
    if needs_hands(recipe, has_shutter=has_shutter):
        raise PlanError(
            "its darks are taken by hand, and nobody can be asked: this is no terminal",
            where=recipe.path,
            do="Run it at a terminal, or give the rig a shutter and the recipe `dark: {by: shutter}`.",
        )
