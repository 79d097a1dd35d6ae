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
    trace: Trace = None,
    as_json: AsJson = False,
) -> int:
    """Do the real run, then fit what it recorded."""
    from rigctl.cli.console import progress_for_stream
    from rigctl.cli.ending import tell_outcome
    from rigctl.cli.loading import free_path, load
    from rigctl.cli.person import PersonAtTerminal, is_somebody_there
    from rigctl.cli.signals import stopping_on_signals
    from rigctl.cli.tracing import tapping
    from rigctl.runner.hardware import real_job
    from rigctl.runner.person import NobodyThere
    from rigctl.runner.run import run_job
    from rigctl.timeline import StopRequest

    loaded = load(recipe, rig)
    _refuse_without_hands(loaded, recipe)
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


def _refuse_without_hands(loaded: "Loaded", path: Path) -> None:
    """Refuse darks by hand where nobody can be asked for them."""
    from rigctl.cli.person import is_somebody_there
    from rigctl.runner.bench import filled_roles
    from rigctl.runner.visiting import is_dark_by_hand

    roles = loaded.recipe.roles
    has_shutter = any(roles[role].kind == "shutter" for role in filled_roles(loaded.recipe, loaded.rig))
    if is_dark_by_hand(loaded.recipe, has_shutter) and not is_somebody_there():
        raise PlanError(
            "its darks are taken by hand, and nobody can be asked: this is no terminal",
            where=str(path),
            do="Run it at a terminal, or give the rig a shutter and the recipe `dark: {by: shutter}`.",
        )
