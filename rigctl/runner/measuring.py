"""What a run does between opening the bench and making it safe.

It owns the order: identify, home, set up, darks with the source off, prepare, steps with their darks, and which
failures of a visit cost an attempt instead of the night.
"""

from dataclasses import asdict

from rigctl.errors import FramingError, LinkTimeoutError, PolrigError
from rigctl.files.recipe import Dark, Recipe, Step
from rigctl.record.run_writer import RunWriter
from rigctl.runner.bench import OpenBench, identify_all
from rigctl.runner.darks import Darkness
from rigctl.runner.forecast import Forecast
from rigctl.runner.guard import Guard
from rigctl.runner.person import Person
from rigctl.runner.plan import Visit, aperture_s, count_visits, step_visits
from rigctl.runner.polling import complete
from rigctl.runner.prepare import Climate
from rigctl.runner.presence import Presence
from rigctl.runner.progress import Level, Progress
from rigctl.runner.prospect import expected_peaks_w
from rigctl.runner.visiting import Visiting, is_overloaded
from rigctl.timeline import Timeline

ATTEMPTS = 3
"""How often a visit is begun before the run ends: the link finds its step again in between."""
REPEATABLE = (LinkTimeoutError, FramingError)


class Measuring:
    """One run under way on an open bench."""

    def __init__(
        self,
        recipe: Recipe,
        bench: OpenBench,
        writer: RunWriter,
        *,
        timeline: Timeline,
        person: Person,
        progress: Progress,
        guard: Guard,
    ) -> None:
        self.recipe, self.bench, self.writer = recipe, bench, writer
        self.timeline, self.progress, self.guard = timeline, progress, guard
        self.climate = Climate(bench, timeline, self._reading)
        self.visiting = Visiting(bench, timeline, self.climate)
        self.darkness = Darkness(bench, timeline, self.visiting, person)
        self.presence = Presence(bench, timeline, person)
        self.total, self.done, self.began_s = count_visits(recipe), 0, 0.0
        self.peaks_w = expected_peaks_w(recipe)
        self.expected_s = Forecast(recipe, bench.capabilities).duration_s()

    def measure(self) -> None:
        """Do everything that the recipe asks for."""
        self.progress.phase("opening and identifying")
        self._identify()
        self.darkness.set_shutter(is_open=False)
        self._home()
        self._set_up()
        first, last = self.recipe.steps[0], self.recipe.steps[-1]
        self._darks(first, "before", kinds=("zero", "background"))
        self._prepare()
        self.began_s = self.timeline.now()
        for step in self.recipe.steps:
            self._step(step)
        self._darks(last, "after", kinds=("zero",))
        if any(dark.kind == "background" and dark.after for dark in self.recipe.darks):
            self.climate.rest()
            self._darks(last, "after", kinds=("background",))

    def _identify(self) -> None:
        for role, identity in identify_all(self.bench).items():
            entry = self.bench.entries[role]
            about = {"instrument": entry.name, "role": role}
            self.writer.append({"kind": "identity", **about, "identity": asdict(identity)})
            if entry.calibration is not None:
                values = {**asdict(entry.calibration), "due": entry.calibration.due.isoformat()}
                self.writer.append({"kind": "calibration", "instrument": entry.name, "values": values})

    def _home(self) -> None:
        """Home mounts that lost their place: beam blocked, meters on their largest range."""
        lost = {role: stage for role, stage in self.bench.stages.items() if not stage.is_homed()}
        if not lost:
            return
        self.progress.phase("homing " + ", ".join(lost))
        for role, meter in self.bench.meters.items():
            self.visiting.use_range(role, meter.capabilities.ranges_w[-1])
        complete(self.timeline, {role: stage.begin_home() for role, stage in lost.items()})
        self._event("homed " + ", ".join(lost), "info")

    def _set_up(self) -> None:
        for role, meter in self.bench.meters.items():
            meter.set_wavelength(self.recipe.source.wavelength.value)
            meter.set_dwell(self.recipe.dwell.readings, aperture_s(self.recipe))
            self.visiting.use_range(role, max(peaks_w.get(role, 0.0) for peaks_w in self.peaks_w.values()))
        for source in self.bench.sources.values():
            source.switch_off()  # whoever used it before may have left it on
            source.program()
        for controller in self.bench.controllers.values():
            controller.program()
        for role, instrument in self.bench.instruments.items():
            values = dict(instrument.settings())
            self.writer.append({"kind": "settings", "instrument": self.bench.entries[role].name, "values": values})

    def _prepare(self) -> None:
        """Start the watchdog before anything may emit, then do the lines of `prepare:` in order."""
        self.progress.phase("preparing")
        self.guard.start()
        for wanted in self.recipe.preparations:
            self.progress.phase(f"preparing '{wanted.role}'")
            self.climate.prepare(wanted)

    def _step(self, step: Step) -> None:
        self.darkness.set_shutter(is_open=False)
        is_confirmed = self.presence.arrange(step)
        if not is_confirmed:
            self._event(f"step '{step.name}': nobody confirmed {', '.join(step.without)} out of the beam", "warning")
        for role in self.bench.meters:
            self.visiting.use_range(role, self.peaks_w[step.name].get(role, 0.0))
        self._darks(step, "before", kinds=("dark",))
        self.progress.phase(f"step '{step.name}'")
        self.darkness.let_light_in()
        for visit in step_visits(step):
            self._timed_darks(step)
            self._visit(visit, step, is_confirmed=is_confirmed)
        self._darks(step, "after", kinds=("dark",))

    def _darks(self, step: Step, when: str, *, kinds: tuple[str, ...]) -> None:
        for dark in self.recipe.darks:
            if dark.kind in kinds and (dark.before if when == "before" else dark.after):
                self._dark(dark, step, when)

    def _timed_darks(self, step: Step) -> None:
        for dark in self.recipe.darks:
            if dark.kind == "dark" and self.darkness.is_due(dark):
                self._dark(dark, step, "during")
                self.darkness.let_light_in()

    def _dark(self, dark: Dark, step: Step, when: str) -> None:
        self.progress.phase(f"{dark.kind} {when} step '{step.name}'")
        for record in self.darkness.take(dark, step.name, when):
            self.writer.append(record)

    def _visit(self, visit: Visit, step: Step, *, is_confirmed: bool) -> None:
        """Take a visit, again where it may be repeated; every attempt is recorded."""
        about = {"start": 1, "present": self.presence.state(step), "confirmed": is_confirmed}
        for attempt in range(1, ATTEMPTS + 1):
            is_last = attempt == ATTEMPTS
            try:
                record = self.visiting.take(visit, step)
            except REPEATABLE as error:
                self._failed(visit, attempt, error)
                if is_last:
                    raise
                self.visiting.forget_positions()
                continue
            overloaded = is_overloaded(record)
            status = "saturated" if overloaded else "ok"
            self.writer.append({**record, **about, "attempt": attempt, "status": status})
            if not overloaded or is_last or not self._ranges_raised(visit, overloaded):
                break
        self._progress()

    def _ranges_raised(self, visit: Visit, roles: list[str]) -> bool:
        raised = [role for role in roles if self.visiting.raise_range(role)]
        for role in roles:
            what = "went to its next range and repeats" if role in raised else "has no larger range for"
            self._event(f"'{role}' was overloaded: it {what} visit {visit.number}", "warning")
        return bool(raised)

    def _failed(self, visit: Visit, attempt: int, error: PolrigError) -> None:
        now_s = self.timeline.now()
        self.writer.append(
            {
                "kind": "visit",
                "step": visit.step,
                "visit": visit.number,
                "index": list(visit.index),
                "attempt": attempt,
                "start": 1,
                "t_begin": now_s,
                "t_end": now_s,
                "asked": dict(visit.asked),
                "status": "failed",
                "why": str(error),
            }
        )
        self._event(f"visit {visit.number}, attempt {attempt} of {ATTEMPTS}: {error}", "warning")

    def _progress(self) -> None:
        self.done += 1
        elapsed_s = self.timeline.now() - self.began_s
        planned_s = self.expected_s / self.total
        # the plan's own pace counts as ten visits, so that the first few do not make the forecast jump
        pace_s = (elapsed_s + 10 * planned_s) / (self.done + 10)
        self.progress.visit(self.done, self.total, pace_s * (self.total - self.done))
        self.writer.view_if_due(self.timeline)

    def _reading(self, role: str, values: dict[str, float]) -> None:
        self.writer.append({"kind": "reading", "t": self.timeline.now(), "role": role, "values": values})

    def _event(self, text: str, level: Level) -> None:
        self.progress.event(text, level)
        self.writer.append({"kind": "event", "t": self.timeline.now(), "text": text, "level": level})
