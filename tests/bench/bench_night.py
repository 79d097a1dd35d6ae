"""Twelve-hour nights rehearsed: 14,400 visits, two meters, four readings a visit, the bench's physics.

One night has a source that nobody drives; the other a driven and cooled diode and an oven, whose conditions are read at
every visit.

Prints visits a second beside a bare loop of the same number of exchanges in the same run, the exchanges a visit, the
memory at a tenth and at the end, and where the time goes.
"""

import cProfile
import io
import pstats
import resource
import sys
import tempfile
import time
from dataclasses import replace
from pathlib import Path

from rigctl.files import match, parse_recipe, parse_rig
from rigctl.links.channel import Channel
from rigctl.links.family import Opening
from rigctl.plugins import find_bench_factory, find_drivers
from rigctl.runner.plan import count_visits
from rigctl.runner.progress import Level
from rigctl.runner.rehearsal import rehearsal_job
from rigctl.runner.run import Job, run_job

RECIPE = """
recipe: a twelve-hour night
roles:
  part mount: rotation stage
  signal: power meter
  monitor: power meter
  diode: current source
  diode tec: temperature controller
  oven: temperature controller
  shutter: shutter
source: {{wavelength: 785.2 nm, power: 2 mW +- 20 %, driven by: diode, cooled by: diode tec}}
optics:
  - polarizer: {{name: entry polarizer, axis: 0 deg, extinction ratio: 100000:1 +- 30 %}}
  - pick-off: {{to: monitor, fraction: 0.04 +- 0.002}}
  - retarder:
      {{name: part, turned by: part mount, warmed by: oven, retardance: 0.25 waves, unknown: [retardance, dial offset]}}
  - polarizer: {{name: exit polarizer, axis: 0 deg +- 0.1 deg, extinction ratio: 100000:1 +- 30 %}}
  - detector: {{role: signal}}
prepare:
  - diode tec: {{to: 24 degC, steady: {{within: 0.02 K, for: 60 s, give up after: 15 min}}}}
  - diode: {{to: 34 mA, ramp: 5 mA/s, warm-up: 10 min}}
steps:
  - name: night
    sweep:
      - oven:
          values: [22 degC, 25 degC, 28 degC, 31 degC]
          steady: {{within: 0.05 K, for: 5 min, give up after: 60 min}}
      - part mount: {{turn: {turns}, step: 1 deg, approach: from below}}
dwell: {{time: 400 ms, at least: 4 readings}}
dark: {{by: shutter, before: true, after: true, every: 1 h}}
"""
STEADY_RECIPE = """
recipe: a twelve-hour night on a steady source
roles: {{part mount: rotation stage, signal: power meter, monitor: power meter, shutter: shutter}}
source: {{wavelength: 785.2 nm, power: 2 mW +- 20 %}}
optics:
  - polarizer: {{name: entry polarizer, axis: 0 deg, extinction ratio: 100000:1 +- 30 %}}
  - pick-off: {{to: monitor, fraction: 0.04 +- 0.002}}
  - retarder: {{name: part, turned by: part mount, retardance: 0.25 waves, unknown: [retardance, dial offset]}}
  - polarizer: {{name: exit polarizer, axis: 0 deg +- 0.1 deg, extinction ratio: 100000:1 +- 30 %}}
  - detector: {{role: signal}}
steps:
  - name: night
    sweep: [{{repeat: 4}}, {{part mount: {{turn: {turns}, step: 1 deg, approach: from below}}}}]
dwell: {{time: 400 ms, at least: 4 readings}}
dark: {{by: shutter, before: true, after: true, every: 1 h}}
"""
TURNS = 10


class Memory:
    """Watches the process's largest memory while a run goes on."""

    def __init__(self) -> None:
        self.at_tenth_mb = 0.0

    def phase(self, what: str) -> None:
        """Do nothing."""

    def event(self, text: str, level: Level) -> None:
        """Do nothing."""

    def visit(self, done: int, total: int, left_s: float) -> None:
        """Look at the memory once a tenth is done."""
        if done == total // 10:
            self.at_tenth_mb = peak_mb()


def peak_mb() -> float:
    return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024


def make_job(folder: Path, text: str, turns: int, *, seed: int, memory: Memory) -> Job:
    drivers, factory = find_drivers(), find_bench_factory()
    recipe = parse_recipe(text.format(turns=turns), "night.yaml")
    rig_text = factory.default_rig({name: role.kind for name, role in recipe.roles.items()})
    rig = parse_rig(rig_text, "default", drivers, factory)
    match(recipe, rig, drivers)
    path = folder / f"{recipe.title.replace(' ', '-')}-{seed}.h5"
    return rehearsal_job(recipe, rig, drivers=drivers, factory=factory, seed=seed, path=path, progress=memory)


def counted(job: Job) -> tuple[Job, list[int]]:
    """The same job, and a list whose length is the number of writes."""
    writes: list[int] = []

    def opener(address: str, opening: Opening) -> Channel:
        channel = job.open_channel(address, opening)
        write = channel.write

        def counting(data: bytes, deadline_s: float) -> None:
            writes.append(len(data))
            write(data, deadline_s)

        channel.write = counting  # type: ignore[method-assign]
        return channel

    return replace(job, open_channel=opener), writes


def bare_exchanges_a_second(folder: Path) -> float:
    """One query after another on a meter's loopback, with nothing around it."""
    job = make_job(folder, RECIPE, 1, seed=99, memory=Memory())
    channel = job.open_channel(job.rig.instruments[job.rig.roles["signal"]].at, Opening())
    began_s = time.perf_counter()
    for _ in range(20_000):
        channel.write(b"SENSE:POWER:RANGE:UPPER?\n", job.timeline.now() + 1.0)
        channel.readline(job.timeline.now() + 1.0)
    return 20_000 / (time.perf_counter() - began_s)


def profile_of(job: Job) -> str:
    profile, text = cProfile.Profile(), io.StringIO()
    profile.enable()
    run_job(job)
    profile.disable()
    pstats.Stats(profile, stream=text).sort_stats("tottime").print_stats(12)
    return "\n".join(line for line in text.getvalue().splitlines()[6:] if line.strip())


def measure(folder: Path, text: str) -> None:
    """Rehearse two nights of a recipe and print what they took."""
    job, writes = counted(make_job(folder, text, 1, seed=1, memory=Memory()))
    run_job(job)
    exchanges = len(writes) / count_visits(job.recipe)
    print(f"{job.recipe.title}: {exchanges:.2f} exchanges a visit")
    rates = []
    for seed in (2, 3):
        memory = Memory()
        job = make_job(folder, text, TURNS, seed=seed, memory=memory)
        visits = count_visits(job.recipe)
        began_s, cpu_s = time.perf_counter(), time.process_time()
        outcome = run_job(job)
        wall_s, used_s = time.perf_counter() - began_s, time.process_time() - cpu_s
        assert outcome.exit_code == 0, outcome.why
        rates.append(visits / used_s)
        print(f"  {visits} visits in {wall_s:.2f} s ({used_s:.2f} s of processor): {rates[-1]:,.0f} visits a second")
        print(f"  memory: {memory.at_tenth_mb:.0f} MB at a tenth of the night, {peak_mb():.0f} MB at its end")
    bare = bare_exchanges_a_second(folder)
    print(
        f"  bare exchanges {bare:,.0f} a second: a visit takes {bare / exchanges / max(rates):.1f} times its own alone"
    )


def main() -> int:
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        measure(folder, STEADY_RECIPE)
        measure(folder, RECIPE)
        print(profile_of(make_job(folder, RECIPE, 2, seed=5, memory=Memory())))
    return 0


if __name__ == "__main__":
    sys.exit(main())
