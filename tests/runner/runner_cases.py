"""Recipes with several steps and mounts, channels that listen, and instruments without a wire."""

from collections.abc import Callable, Mapping
from contextlib import AbstractContextManager
from dataclasses import dataclass, field

from rehearsal_cases import RECIPE, RIG, Meddler

from rigctl.files import parse_recipe, parse_rig
from rigctl.files.rig import InstrumentEntry
from rigctl.interfaces import (
    Begun,
    Dwell,
    Flag,
    Identity,
    MeterCapabilities,
    ShutterCapabilities,
    StageCapabilities,
)
from rigctl.links.channel import Channel
from rigctl.links.link import Link
from rigctl.plugins import find_bench_factory, find_drivers
from rigctl.runner.bench import OpenBench, open_bench
from rigctl.runner.limits import LimitedSource
from rigctl.runner.prepare import Climate
from rigctl.runner.run import Job
from rigctl.runner.visiting import Visiting
from rigctl.timeline import Timeline

SWEEP = "sweep: [{part mount: {turn: 1, step: 30 deg, approach: from below, settle: 150 ms}}]"
TWO_STEPS = RECIPE.replace(
    SWEEP,
    """steps:
  - {name: up, sweep: [{part mount: {turn: 1, step: 30 deg, approach: from below, settle: 150 ms}}]}
  - {name: down, sweep: [{part mount: {values: [330 deg, 200 deg, 20 deg], approach: from above}}]}""",
)
TWO_MOUNTS = """
recipe: a polarizer behind a turned one
roles: {analyser: rotation stage, part mount: rotation stage, signal: power meter}
source: {wavelength: 785.2 nm, power: 2 mW}
optics:
  - polarizer: {name: entry polarizer, axis: 0 deg, extinction ratio: 100000:1}
  - polarizer: {name: part, turned by: part mount, extinction ratio: 1000:1, unknown: dial offset}
  - polarizer: {name: analyser plate, turned by: analyser, extinction ratio: 100000:1}
  - detector: {role: signal}
sweep:
  - analyser: {values: [0 deg, 45 deg, 90 deg]}
  - part mount: {values: [10 deg, 50 deg]}
dwell: {time: 100 ms, at least: 4 readings}
"""
TWO_AXES = """
rig: both mounts on one controller
instruments:
  axis 1: {driver: gcode-rotary, at: tcp://127.0.0.1:5001, channel: A}
  axis 2: {driver: gcode-rotary, at: tcp://127.0.0.1:5001, channel: B}
  head 1: {driver: scpi-power-meter, at: tcp://127.0.0.1:5002}
roles: {analyser: axis 1, part mount: axis 2, signal: head 1}
"""
TWO_CONTROLLERS = TWO_AXES.replace("5001, channel: B", "5003, channel: B")
SLOW_HEAD = RIG.replace("at: tcp://127.0.0.1:5002}", "at: tcp://127.0.0.1:5002, time constant: 500 ms}")
ADDRESS = "tcp://127.0.0.1:5009"
INSTANT = ShutterCapabilities(0.0)
QUICK = StageCapabilities((-3600.0, 3600.0), 20.0, 100.0, 0.1, 0.001)
SLOW_WHEN_SENSITIVE = MeterCapabilities(
    (2e-6, 2e-5, 2e-4), (0.5, 0.05, 0.005), (1e-12, 1e-11, 1e-10), 0.0, 2e-4, (1e-3, 10.0)
)


class Listener(Meddler):
    """A channel that keeps what is written, and counts how often it was closed."""

    def __init__(self, channel: Channel, heard: list[bytes]) -> None:
        super().__init__(channel, lambda: None, at=b"never", nth=1)
        self.heard, self.closings = heard, 0

    def write(self, data: bytes, deadline_s: float) -> None:
        self.heard.append(data)
        super().write(data, deadline_s)

    def close(self) -> None:
        self.closings += 1
        super().close()


@dataclass
class Ear:
    """Wraps every channel of a job in a listener: what was written, in the order of time."""

    heard: list[bytes] = field(default_factory=list)
    channels: list[Listener] = field(default_factory=list)

    def __call__(self, channel: Channel, _timeline: Timeline) -> Channel:
        self.channels.append(Listener(channel, self.heard))
        return self.channels[-1]

    def moves(self, letter: str = "A") -> list[float]:
        """Angles to which an axis was sent, deg."""
        head = f"G90 G53 G0 {letter}".encode()
        return [float(line.removeprefix(head)) for line in self.heard if line.startswith(head)]


def opened(job: Job, timeline: Timeline | None = None) -> AbstractContextManager[OpenBench]:
    """The bench of a job, opened outside a run."""
    return open_bench(
        job.recipe, job.rig, job.drivers, open_channel=job.open_channel, timeline=timeline or job.timeline
    )


@dataclass
class FakeShutter:
    """A shutter that moves in the time given; `states` keeps what it was told."""

    timeline: Timeline
    moves_in_s: float = 0.0
    states: list[bool] = field(default_factory=list)
    reads_back: Callable[[bool], bool] = lambda is_open: is_open
    capabilities: ShutterCapabilities = INSTANT

    def identify(self) -> Identity:
        return Identity("", "", "", "")

    def settings(self) -> Mapping[str, str | float]:
        return {}

    def begin_set(self, is_open: bool) -> Begun[bool]:
        self.states.append(is_open)
        due_s = self.timeline.now() + self.moves_in_s
        return Begun(due_s, self.is_open, again_s=0.1, give_up_s=due_s + 1.0)

    def is_open(self) -> bool:
        return self.reads_back(self.states[-1])


@dataclass
class FakeStage:
    """A mount that arrives at once; `stops` counts how often it was stopped."""

    timeline: Timeline
    capabilities: StageCapabilities = QUICK
    asked_deg: list[float] = field(default_factory=list)
    stops: int = 0
    act: Callable[[], None] = lambda: None

    def identify(self) -> Identity:
        return Identity("", "", "", "")

    def settings(self) -> Mapping[str, str | float]:
        return {}

    def begin_move(self, angle_deg: float) -> Begun[float]:
        self.asked_deg.append(angle_deg)
        now_s = self.timeline.now()
        return Begun(now_s, self.angle_deg, again_s=0.1, give_up_s=now_s + 1.0)

    def begin_home(self) -> Begun[float]:
        return self.begin_move(0.0)

    def angle_deg(self) -> float:
        return self.asked_deg[-1]

    def is_homed(self) -> bool:
        return True

    def stop(self) -> None:
        self.stops += 1
        self.act()


@dataclass
class FakeMeter:
    """A meter that reads one microwatt; on its smallest range it is slow."""

    timeline: Timeline
    capabilities: MeterCapabilities = SLOW_WHEN_SENSITIVE
    range_w: float = 0.0

    def identify(self) -> Identity:
        return Identity("", "", "", "")

    def settings(self) -> Mapping[str, str | float]:
        return {}

    def set_wavelength(self, wavelength_m: float) -> None:
        pass

    def set_range(self, full_scale_w: float | None) -> float:
        self.range_w = next(full for full in self.capabilities.ranges_w if full >= (full_scale_w or 0.0))
        return self.range_w

    def set_dwell(self, readings: int, aperture_s: float) -> None:
        pass

    def begin_dwell(self) -> Begun[Dwell]:
        now_s = self.timeline.now()
        dwell = Dwell((1e-6, 1e-6), Flag(0), self.range_w, now_s, now_s)
        return Begun(now_s, lambda: dwell, again_s=0.1, give_up_s=now_s + 1.0)


class DeafChannel:
    """A channel of an instrument that does everything without its wire."""

    address = ADDRESS

    def write(self, data: bytes, deadline_s: float) -> None:
        raise AssertionError("nothing is sent")

    def readline(self, deadline_s: float) -> bytes:
        raise AssertionError("nothing is read")

    def read_exact(self, count: int, deadline_s: float) -> bytes:
        raise AssertionError("nothing is read")

    def discard(self) -> bytes:
        return b""

    def close(self) -> None:
        pass


def fake_bench(
    timeline: Timeline,
    *,
    shutter: FakeShutter | None = None,
    stages: Mapping[str, FakeStage] | None = None,
    meters: Mapping[str, FakeMeter] | None = None,
    sources: Mapping[str, LimitedSource] | None = None,
) -> OpenBench:
    """A bench of instruments without a wire, all at one address."""
    roles = [*(["shutter"] if shutter else []), *(stages or {}), *(meters or {}), *(sources or {})]
    entries = {role: InstrumentEntry(role, "fake", ADDRESS, {}, {}) for role in roles}
    drivers = find_drivers()
    rig = parse_rig(RIG, "rig.yaml", drivers, find_bench_factory())
    bench = OpenBench(parse_recipe(RECIPE, "recipe.yaml"), rig, entries)
    bench.stages.update(stages or {})
    bench.meters.update(meters or {})
    bench.sources.update(sources or {})
    if shutter is not None:
        bench.shutter, bench.shutter_role = shutter, "shutter"
    bench.links[ADDRESS] = Link(ADDRESS, DeafChannel, drivers["scpi-switch"].family, timeline)
    return bench


def visiting_on(bench: OpenBench, timeline: Timeline) -> Visiting:
    """What takes visits on a bench; nobody hears how its temperatures move."""
    return Visiting(bench, timeline, Climate(bench, timeline, lambda _role, _values: None))
