"""A run from its first byte to its closed file.

It owns the order of things: limits, run file, open, identify, set up, prepare, steps, make safe, close; and which
exit code an ending has. Whatever happens in between, the bench is made safe and the file closed.
"""

from collections.abc import Mapping
from contextlib import AbstractContextManager, ExitStack
from dataclasses import dataclass, field
from pathlib import Path

from rigctl.errors import NotSafeError, PolrigError, RecordError, StopRequestedError
from rigctl.files.recipe import Recipe
from rigctl.files.rig import Rig
from rigctl.interfaces import Driver
from rigctl.record.layout import Header
from rigctl.record.run_writer import RunWriter, create_run
from rigctl.runner.beforehand import refuse_beforehand
from rigctl.runner.bench import OpenBench, OpenChannel, open_bench
from rigctl.runner.guard import Guard, NoGuard
from rigctl.runner.measuring import Measuring
from rigctl.runner.person import Person
from rigctl.runner.progress import Level, Progress
from rigctl.runner.safe import SafeStep, is_beam_off, make_safe
from rigctl.timeline import Timeline


@dataclass(frozen=True, slots=True, kw_only=True)
class Job:
    """Everything that a run needs; nothing is looked up elsewhere."""

    recipe: Recipe
    rig: Rig
    drivers: Mapping[str, Driver]
    open_channel: OpenChannel
    timeline: Timeline
    person: Person
    progress: Progress
    path: Path
    header: Header
    guard: Guard = field(default_factory=NoGuard)
    is_durable: bool = True


@dataclass(frozen=True, slots=True)
class Outcome:
    """How a run ended: `status` is complete, stopped or failed; `exit_code` as the command line returns it."""

    status: str
    exit_code: int
    why: str
    safe_steps: tuple[SafeStep, ...] = ()
    bug: BaseException | None = field(default=None, compare=False)


def run_job(job: Job) -> Outcome:
    """Do the whole run.

    Errors
    ------
    `LimitError` and `PlanError` for what is refused beforehand, `RecordError` when the run file cannot be created:
    nothing was sent then. Every later failure is an outcome, after the bench was made safe; a bug keeps its exception
    in `Outcome.bug`.
    """
    refuse_beforehand(job.recipe, job.rig, job.drivers, is_somebody_there=job.person.is_there)
    with create_run(job.path, job.header, durable=job.is_durable) as writer:
        outcome = _safely(job, writer)
        _tell_safe(job, writer, outcome.safe_steps)
        return _closed(job, writer, outcome)


def _safely(job: Job, writer: RunWriter) -> Outcome:
    """Measure, and make safe whatever happened."""
    safe_steps: tuple[SafeStep, ...] = ()
    is_lit = is_success = False
    with ExitStack() as stack:
        try:
            bench = stack.enter_context(_opened(job))
            try:
                Measuring(job.recipe, bench, writer, timeline=job.timeline, person=job.person, progress=job.progress,
                          guard=job.guard).measure()  # fmt: skip
                is_success = True
            finally:
                job.progress.phase("making safe")
                safe_steps = make_safe(bench, job.timeline, is_success=is_success)
                is_lit = bench.may_emit() and not is_beam_off(safe_steps)
                if not is_lit:
                    job.guard.release()
            ending = Outcome("complete", 0, "")
        except PolrigError as error:
            ending = _ended_by(error)
        except Exception as error:  # noqa: BLE001  # a bug: shown with its traceback once the file is closed
            ending = Outcome("failed", 70, f"{type(error).__name__}: {error}", bug=error)
    code = NotSafeError.exit_code if is_lit else ending.exit_code
    return Outcome(ending.status, code, ending.why, safe_steps, ending.bug)


def _opened(job: Job) -> AbstractContextManager[OpenBench]:
    return open_bench(job.recipe, job.rig, job.drivers, open_channel=job.open_channel, timeline=job.timeline)


def _ended_by(error: PolrigError) -> Outcome:
    status = "stopped" if isinstance(error, StopRequestedError) else "failed"
    why = f"stopped by {error.what}" if isinstance(error, StopRequestedError) else str(error)
    return Outcome(status, error.exit_code, why)


def _tell_safe(job: Job, writer: RunWriter, steps: tuple[SafeStep, ...]) -> None:
    """Record what was made safe; a disk that fails here has told so already, or tells when the file closes."""
    for step in steps:
        level: Level = "info" if step.is_confirmed else "error"
        job.progress.event(str(step), level)
        try:
            writer.append({"kind": "event", "t": job.timeline.now(), "text": str(step), "level": level})
        except RecordError:
            continue


def _closed(job: Job, writer: RunWriter, outcome: Outcome) -> Outcome:
    """Close the file whatever the outcome; a disk that fails here is the outcome, unless something worse was."""
    try:
        with job.timeline.stop.masked():
            writer.close(outcome.status, t_s=job.timeline.now(), code=outcome.exit_code, why=outcome.why)
    except RecordError as error:
        if outcome.exit_code in (0, StopRequestedError.exit_code):
            return Outcome("failed", error.exit_code, str(error), outcome.safe_steps)
    return outcome
