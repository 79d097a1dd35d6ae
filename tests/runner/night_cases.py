"""Whole nights in small: a driven and cooled diode, an oven, a slide, a monitor, and wires that are listened to."""

import re
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, field, replace
from pathlib import Path

from rehearsal_cases import Meddler, make_job

from rigctl.errors import DisconnectedError
from rigctl.interfaces import Bench, Driver
from rigctl.links.channel import Channel
from rigctl.runner.progress import Silent
from rigctl.runner.rehearsal import SimulatedPerson
from rigctl.runner.run import Job
from rigctl.timeline import Timeline

DIODE_TEC = "diode tec: {to: 24 degC, steady: {within: 0.02 K, for: 20 s, give up after: 10 min}}"
DIODE = "diode: {to: 34 mA, ramp: 5 mA/s, warm-up: 1 min}"
STEPS = """steps:
  - {name: empty, without: part, sweep: [{repeat: 3}]}
  - name: plate
    sweep:
      - oven: {values: [23 degC, 26 degC], steady: {within: 0.05 K, for: 30 s, give up after: 20 min}}
      - part mount: {turn: 1, step: 30 deg, approach: from below}
    order: interleaved 3
"""
DARKS = """dark: {by: shutter, before: true, after: true}
background: {before: true, after: true}
"""
NIGHT = f"""
recipe: a night in small
roles:
  part mount: rotation stage
  signal: power meter
  monitor: {{is: power meter, optional: true}}
  diode: current source
  diode tec: temperature controller
  oven: temperature controller
  shutter: {{is: shutter, optional: true}}
  part slide: {{is: slide, optional: true}}
source: {{wavelength: 785.2 nm, power: 2 mW +- 20 %, driven by: diode, cooled by: diode tec}}
optics:
  - polarizer: {{name: entry polarizer, axis: 0 deg, extinction ratio: 100000:1 +- 30 %}}
  - pick-off: {{to: monitor, fraction: 0.04 +- 0.002}}
  - retarder:
      name: part
      turned by: part mount
      warmed by: oven
      taken out by: part slide
      retardance: 0.25 waves
      unknown: [retardance, dial offset]
  - polarizer: {{name: exit polarizer, axis: 0 deg +- 0.1 deg, extinction ratio: 100000:1 +- 30 %}}
  - detector: {{role: signal}}
prepare:
  - {DIODE_TEC}
  - {DIODE}
{STEPS}dwell: {{time: 200 ms, at least: 4 readings}}
{DARKS}"""
BENCH = """
rig: a whole bench
instruments:
  mount 1: {driver: gcode-rotary, at: tcp://127.0.0.1:5001, speed: 40 deg/s, acceleration: 200 deg/s2}
  head 1: {driver: scpi-power-meter, at: tcp://127.0.0.1:5002}
  head 2: {driver: scpi-power-meter, at: tcp://127.0.0.1:5003}
  source 1: {driver: scpi-current-source, at: tcp://127.0.0.1:5004, channel: 1}
  tec 1: {driver: scpi-temperature-controller, at: tcp://127.0.0.1:5004, channel: 2}
  shutter 1: {driver: scpi-switch, at: tcp://127.0.0.1:5004, channel: 3, at rest: closed}
  slide 1: {driver: scpi-slide, at: tcp://127.0.0.1:5004, channel: 4}
  oven 1: {driver: scpi-temperature-controller, at: tcp://127.0.0.1:5005, channel: 5}
diodes:
  D-1: {on: source 1, limits: {current: 45 mA, compliance: 2.5 V, temperature: 10 degC to 40 degC}, class on label: 3B}
roles:
  part mount: mount 1
  signal: head 1
  monitor: head 2
  diode: source 1
  diode tec: tec 1
  shutter: shutter 1
  part slide: slide 1
  oven: oven 1
"""
APART = BENCH.replace("5004, channel: 2", "5006, channel: 2").replace("5004, channel: 3", "5007, channel: 3")
"""The same bench with the diode's source, its controller and the shutter on wires of their own."""
MOUNT, HEAD, MONITOR, RACK, OVEN, TEC, SHUTTER = (f"tcp://127.0.0.1:{port}" for port in range(5001, 5008))
ALONE = NIGHT.replace("  part slide: {is: slide, optional: true}\n", "").replace("      taken out by: part slide\n", "")
"""The same night where only a person can take the part out."""
NO_SLIDE = BENCH.replace("  slide 1: {driver: scpi-slide, at: tcp://127.0.0.1:5004, channel: 4}\n", "").replace(
    "  part slide: slide 1\n", ""
)
SWEEP_CURRENT = """steps:
  - name: ladder
    sweep:
      - part mount: {values: [0 deg]}
      - diode: {range: 0 mA to 40 mA, step: 5 mA, ramp: 4 mA/s}
"""
SWEEP_TEC = """steps:
  - name: colours
    sweep:
      - diode tec: {values: [24 degC, 20 degC], steady: {within: 0.05 K, for: 10 s, give up after: 10 min}}
      - part mount: {values: [0 deg, 45 deg]}
"""
LADDERS = """steps:
  - name: ladders
    sweep:
      - diode tec: {values: [24 degC, 20 degC], steady: {within: 0.05 K, for: 10 s, give up after: 10 min}}
      - part mount: {values: [0 deg]}
      - diode: {values: [10 mA, 30 mA], ramp: 10 mA/s}
"""


def night(steps: str = STEPS, *, darks: str = DARKS, recipe: str = NIGHT) -> str:
    """The night with other steps or darks; the oven stands at its temperature where no step moves it."""
    text = recipe.replace(STEPS, steps).replace(DARKS, darks)
    return text if "- oven:" in steps else text.replace(f"  - {DIODE}\n", f"  - oven: {{to: 23 degC}}\n  - {DIODE}\n")


@dataclass(frozen=True)
class Said:
    """What was written to an address at an instant."""

    at_s: float
    address: str
    text: str


class Tongue(Meddler):
    """A channel that keeps what is written to it, with its time."""

    def __init__(self, channel: Channel, timeline: Timeline, wire: "Wire") -> None:
        super().__init__(channel, lambda: None, at=b"never", nth=1)
        self._timeline, self._wire = timeline, wire

    def write(self, data: bytes, deadline_s: float) -> None:
        said = Said(self._timeline.now(), self.address, data.decode().strip())
        self._wire.said.append(said)
        if self._wire.cut(said):
            raise DisconnectedError("the connection is gone", address=self.address)
        super().write(data, deadline_s)


@dataclass
class Wire:
    """Wraps every channel of a job: what was said, in the order of time; `cut` tells which message finds no way."""

    said: list[Said] = field(default_factory=list)
    opened: list[str] = field(default_factory=list)
    cut: Callable[[Said], bool] = lambda _said: False

    def __call__(self, channel: Channel, timeline: Timeline) -> Channel:
        self.opened.append(channel.address)
        return Tongue(channel, timeline, self)

    def numbers(self, header: str) -> list[tuple[float, float]]:
        """Instant and number of every setting with a header."""
        pattern = re.compile(re.escape(header) + r" ([-+.\dE]+)")
        return [(said.at_s, float(found[1])) for said in self.said for found in pattern.finditer(said.text)]

    def currents(self) -> list[tuple[float, float]]:
        """Instant and A of every current that was sent."""
        return self.numbers("SOURCE1:CURRENT:LEVEL:IMMEDIATE:AMPLITUDE")

    def temperatures(self, channel: int = 2) -> list[tuple[float, float]]:
        """Instant and degC of every setpoint of a controller that was sent."""
        return self.numbers(f"SOURCE{channel}:TEMPERATURE:SPOINT")

    def when(self, words: str) -> list[float]:
        """Instants of every message with some words in it."""
        return [said.at_s for said in self.said if words in said.text]


class Phases(Silent):
    """Listens to a run: calls something when a phase of it begins, and keeps their names."""

    def __init__(self, acts: Mapping[str, Callable[[], None]] | None = None) -> None:
        self.acts, self.names = dict(acts or {}), list[str]()

    def phase(self, what: str) -> None:
        self.names.append(what)
        self.acts.get(what, lambda: None)()


def make_night(
    path: Path,
    recipe: str = NIGHT,
    rig: str = BENCH,
    *,
    seed: int = 1,
    wire: Wire | None = None,
    drivers: dict[str, Driver] | None = None,
    phases: Phases | None = None,
) -> Job:
    """A rehearsal of a whole night."""
    job = make_job(path, recipe=recipe, rig=rig, seed=seed, wrap=wire or Wire(), drivers=drivers)
    return replace(job, progress=phases or job.progress)


def bench_of(job: Job) -> Bench:
    """The simulated bench behind a rehearsal."""
    assert isinstance(job.person, SimulatedPerson)
    return job.person.bench


def emits(job: Job) -> bool:
    """Whether the simulated source is on, as the bench itself knows it."""
    return bench_of(job).emits(job.timeline.now())


def between(pairs: list[tuple[float, float]], first_s: float, last_s: float) -> Iterator[float]:
    """The numbers of some settings between two instants."""
    return (value for at_s, value in pairs if first_s <= at_s <= last_s)
