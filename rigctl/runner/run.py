"""A run from its first byte to its closed file.

It owns the order of things: run file, open, identify, set up, dark, visits, dark, make safe, close; and which
exit code an ending has. Whatever happens in between, the bench is made safe and the file closed.
"""

from collections.abc import Mapping
from contextlib import AbstractContextManager, ExitStack
from dataclasses import dataclass, field
from pathlib import Path

from rigctl.errors import (
    FramingError,
    LinkTimeoutError,
    NotSafeError,
    PolrigError,
    RecordError,
    StopRequestedError,
)
from rigctl.files.recipe import Recipe, Step
from rigctl.files.rig import Rig
from rigctl.interfaces import Driver
from rigctl.record.layout import Header
from rigctl.record.run_writer import RunWriter, create_run
from rigctl.runner.bench import OpenBench, OpenChannel, declared_capabilities, identify_all, open_bench
from rigctl.runner.person import Person
from rigctl.runner.plan import Visit, aperture_s, count_visits, duration_s, step_visits
from rigctl.runner.polling import complete
from rigctl.runner.progress import Level, Progress
from rigctl.runner.prospect import expected_peak_w
from rigctl.runner.safe import SafeStep, is_beam_blocked, make_safe
from rigctl.runner.visiting import Visiting, is_overloaded
from rigctl.timeline import Timeline

ATTEMPTS = 3
"""How often a visit is begun before the run ends: the link finds its step again in between."""
REPEATABLE = (LinkTimeoutError, FramingError)


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
    `RecordError` when the run file cannot be created (nothing was sent then). Every later failure is an outcome,
    after the bench was made safe; a bug keeps its exception in `Outcome.bug`.
    """
    with create_run(job.path, job.header, durable=job.is_durable) as writer:
        outcome = _Run(job, writer).outcome()
        return _closed(writer, job.timeline, outcome)


def _closed(writer: RunWriter, timeline: Timeline, outcome: Outcome) -> Outcome:
    """Close the file whatever the outcome; a disk that fails here is the outcome, unless something worse was."""
    try:
        with timeline.stop.masked():
            writer.close(outcome.status, t_s=timeline.now(), code=outcome.exit_code, why=outcome.why)
    except RecordError as error:
        if outcome.exit_code in (0, StopRequestedError.exit_code):
            return Outcome("failed", error.exit_code, str(error), outcome.safe_steps)
    return outcome


def _ended_by(error: PolrigError) -> Outcome:
    status = "stopped" if isinstance(error, StopRequestedError) else "failed"
    why = f"stopped by {error.what}" if isinstance(error, StopRequestedError) else str(error)
    return Outcome(status, error.exit_code, why)


class _Run:
    """The state of one run under way."""

    def __init__(self, job: Job, writer: RunWriter) -> None:
        self.job, self.writer = job, writer
        self.timeline, self.recipe = job.timeline, job.recipe
        self.total = count_visits(job.recipe)
        self.done = 0
        self.began_s = 0.0
        self.expected_s = duration_s(job.recipe, declared_capabilities(job.recipe, job.rig, job.drivers))

    def outcome(self) -> Outcome:
        """Measure, and make safe whatever happened."""
        safe_steps: tuple[SafeStep, ...] = ()
        is_lit = False
        with ExitStack() as stack:
            try:
                bench = stack.enter_context(self._opened())
                try:
                    self._measure(bench)
                    ending = Outcome("complete", 0, "")
                finally:
                    self.job.progress.phase("making safe")
                    safe_steps = make_safe(bench, self.timeline)
                    is_lit = bench.has_let_light_in and not is_beam_blocked(safe_steps)
            except PolrigError as error:
                ending = _ended_by(error)
            except Exception as error:  # noqa: BLE001  # a bug: shown with its traceback once the file is closed
                ending = Outcome("failed", 70, f"{type(error).__name__}: {error}", bug=error)
        self._tell_safe(safe_steps)
        code = NotSafeError.exit_code if is_lit else ending.exit_code
        return Outcome(ending.status, code, ending.why, safe_steps, ending.bug)

    def _opened(self) -> AbstractContextManager[OpenBench]:
        job = self.job
        return open_bench(job.recipe, job.rig, job.drivers, open_channel=job.open_channel, timeline=self.timeline)

    def _measure(self, bench: OpenBench) -> None:
        visiting = Visiting(bench, self.recipe, self.timeline, self.job.person)
        self.job.progress.phase("opening and identifying")
        self._identify(bench)
        visiting.set_shutter(is_open=False)
        self._home(bench, visiting)
        self._set_up(bench, visiting)
        dark = self.recipe.dark
        for step in self.recipe.steps:
            if dark is not None and dark.before:
                self._dark(visiting, step, "before")
            self.job.progress.phase(f"step '{step.name}'")
            visiting.open_beam()
            self.began_s = self.began_s or self.timeline.now()
            for visit in step_visits(step):
                self._visit(visiting, visit, step)
            if dark is not None and dark.after:
                self._dark(visiting, step, "after")

    def _identify(self, bench: OpenBench) -> None:
        for role, identity in identify_all(bench).items():
            name = bench.entries[role].name
            fields = {key: getattr(identity, key) for key in ("maker", "model", "serial", "firmware")}
            self.writer.append({"kind": "identity", "instrument": name, "role": role, "identity": fields})

    def _home(self, bench: OpenBench, visiting: Visiting) -> None:
        """Home mounts that lost their place: beam blocked, meters on their largest range."""
        lost = {role: stage for role, stage in bench.stages.items() if not stage.is_homed()}
        if not lost:
            return
        self.job.progress.phase("homing " + ", ".join(lost))
        for role, meter in bench.meters.items():
            visiting.use_range(role, meter.capabilities.ranges_w[-1])
        complete(self.timeline, {role: stage.begin_home() for role, stage in lost.items()})
        self._event("homed " + ", ".join(lost), "info")

    def _set_up(self, bench: OpenBench, visiting: Visiting) -> None:
        for role, meter in bench.meters.items():
            meter.set_wavelength(self.recipe.source.wavelength.value)
            meter.set_dwell(self.recipe.dwell.readings, aperture_s(self.recipe))
            visiting.use_range(role, expected_peak_w(self.recipe, role))
        for role, instrument in bench.instruments():
            values = dict(instrument.settings())
            self.writer.append({"kind": "settings", "instrument": bench.entries[role].name, "values": values})

    def _dark(self, visiting: Visiting, step: Step, when: str) -> None:
        self.job.progress.phase(f"dark {when} step '{step.name}'")
        for record in visiting.dark(step.name, when):
            self.writer.append(record)

    def _visit(self, visiting: Visiting, visit: Visit, step: Step) -> None:
        """Take a visit, again where it may be repeated; every attempt is recorded."""
        for attempt in range(1, ATTEMPTS + 1):
            is_last = attempt == ATTEMPTS
            try:
                record = visiting.take(visit, step)
            except REPEATABLE as error:
                self._failed(visit, attempt, error)
                if is_last:
                    raise
                visiting.forget_positions()
                continue
            overloaded = is_overloaded(record)
            status = "saturated" if overloaded else "ok"
            self.writer.append({**record, "attempt": attempt, "start": 1, "status": status})
            if not overloaded or is_last or not self._ranges_raised(visiting, visit, overloaded):
                break
        self._progress()

    def _ranges_raised(self, visiting: Visiting, visit: Visit, roles: list[str]) -> bool:
        raised = [role for role in roles if visiting.raise_range(role)]
        for role in roles:
            what = "went to its next range and repeats" if role in raised else "has no larger range for"
            self._event(f"'{role}' was overloaded: it {what} visit {visit.number}", "warning")
        return bool(raised)

    def _failed(self, visit: Visit, attempt: int, error: PolrigError) -> None:
        where = {"step": visit.step, "visit": visit.number, "index": list(visit.index)}
        now_s = self.timeline.now()
        self.writer.append(
            {
                "kind": "visit", **where, "attempt": attempt, "start": 1, "t_begin": now_s, "t_end": now_s,
                "asked": dict(visit.asked_deg), "read": {}, "detectors": {}, "status": "failed", "why": str(error),
            }
        )  # fmt: skip
        self._event(f"visit {visit.number}, attempt {attempt} of {ATTEMPTS}: {error}", "warning")

    def _progress(self) -> None:
        self.done += 1
        elapsed_s = self.timeline.now() - self.began_s
        planned_s = self.expected_s / self.total
        # the plan's own pace counts as ten visits, so that the first few do not make the forecast jump
        pace_s = (elapsed_s + 10 * planned_s) / (self.done + 10)
        self.job.progress.visit(self.done, self.total, pace_s * (self.total - self.done))
        self.writer.view_if_due(self.timeline)

    def _tell_safe(self, steps: tuple[SafeStep, ...]) -> None:
        """Record what was made safe; a disk that fails here has told so already, or tells when the file closes."""
        for step in steps:
            try:
                if step.is_confirmed:
                    self._event(f"'{step.role}' {step.wanted}", "info")
                else:
                    self._event(f"'{step.role}' could not be confirmed {step.wanted}: {step.trouble}", "error")
            except RecordError:
                continue

    def _event(self, text: str, level: Level) -> None:
        self.job.progress.event(text, level)
        self.writer.append({"kind": "event", "t": self.timeline.now(), "text": text, "level": level})
