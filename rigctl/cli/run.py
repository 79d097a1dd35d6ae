"""`polrig run`: the real run."""

from pathlib import Path
from typing import Annotated

import typer

from rigctl.cli.options import AsJson, Out, RecipePath, Trace

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
    from rigctl.runner.beforehand import refuse_beforehand
    from rigctl.runner.bench import emitting_roles
    from rigctl.runner.hardware import real_job
    from rigctl.runner.person import NobodyThere
    from rigctl.runner.run import run_job
    from rigctl.timeline import StopRequest

    loaded = load(recipe, rig)
    refuse_beforehand(loaded.recipe, loaded.rig, loaded.drivers, is_somebody_there=is_somebody_there())
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
