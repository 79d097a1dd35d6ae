"""`polrig rehearse`: the whole run on twins in virtual time, then the fit."""

import time
from pathlib import Path
from typing import Annotated

import typer

from rigctl.cli.options import AsJson, Out, RecipePath, Trace

NAME = "rehearse"
DEFAULT_SEED = 1


def command(
    recipe: RecipePath,
    rig: Annotated[Path | None, typer.Option(help="Rig file; without one, a well-behaved simulated bench.")] = None,
    out: Out = None,
    seed: Annotated[
        int | None, typer.Option(min=0, help="Which bench and which noise; the same seed, the same data.")
    ] = None,
    trace: Trace = None,
    as_json: AsJson = False,
) -> int:
    """Do the whole run on a simulated bench.

    Virtual time: a night takes seconds. The fit of what was recorded follows, beside the hidden truth.
    """
    from rigctl.cli.console import progress_for_stream
    from rigctl.cli.ending import tell_outcome
    from rigctl.cli.loading import free_path, load
    from rigctl.cli.signals import stopping_on_signals
    from rigctl.cli.tracing import tapping
    from rigctl.runner.rehearsal import rehearsal_job
    from rigctl.runner.run import run_job
    from rigctl.timeline import StopRequest

    loaded = load(recipe, rig)
    chosen = next(number for number in (seed, loaded.rig.simulated.seed, DEFAULT_SEED) if number is not None)
    path = free_path(out, f"{recipe.stem}-rehearsal-{chosen}")
    stop, progress = StopRequest(), progress_for_stream()
    with stopping_on_signals(stop), tapping(trace) as wrap:
        job = rehearsal_job(
            loaded.recipe,
            loaded.rig,
            drivers=loaded.drivers,
            factory=loaded.factory,
            seed=chosen,
            path=path,
            progress=progress,
            stop=stop,
            wrap=wrap,
        )
        began_s = time.perf_counter()
        outcome = run_job(job)
        took_s = time.perf_counter() - began_s
    progress.end()
    lead = f"rehearsed '{loaded.recipe.title}' with seed {chosen} in {took_s:.2f} s"
    return tell_outcome(job, outcome, lead, as_json=as_json)
