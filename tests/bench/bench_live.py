"""Wall time of a live sweep over TCP beside the time that motion, settling and dwell must take."""

import subprocess
import sys
import tempfile
import time
from pathlib import Path

from rigctl.files import load_recipe, load_rig
from rigctl.files.recipe import Recipe
from rigctl.interfaces import StageCapabilities
from rigctl.plugins import find_bench_factory, find_drivers
from rigctl.record import load_run
from rigctl.runner.approach import waypoints

ROOT = Path(__file__).resolve().parents[2]
COMMAND = (sys.executable, "-m", "rigctl")


def needed_s(recipe: Recipe, stage: StageCapabilities) -> float:
    """Motion, settling and dwell of every visit but the first, which starts from an unknown angle."""
    (axis,) = recipe.steps[0].sweep
    total = 0.0
    for last, target in zip(axis.values, axis.values[1:], strict=False):
        here = last
        for point in waypoints(last, target, axis.approach, backlash_deg=stage.backlash_deg):
            total += stage.travel_time_s(point - here)
            here = point
        total += axis.settle_s + recipe.dwell.time_s
    return total


def measure(folder: Path, recipe_text: str, rig_text: str, what: str) -> None:
    """Serve the twins of a rig, run a recipe on them, and print what the run took over what it needed."""
    recipe_path, rig_path, twins_path, run_path = (
        folder / n for n in ("recipe.yaml", "rig.yaml", "twins.yaml", "run.h5")
    )
    recipe_path.write_text(recipe_text, encoding="utf-8")
    rig_path.write_text(rig_text, encoding="utf-8")
    serving = ("simulate", rig_path, "--recipe", recipe_path, "--write", twins_path)
    twins = subprocess.Popen([*COMMAND, *map(str, serving)], stdout=subprocess.DEVNULL)
    try:
        while not twins_path.exists():
            time.sleep(0.05)
        running = [*COMMAND, *map(str, ("run", recipe_path, "--rig", twins_path, "--arm", "--out", run_path))]
        subprocess.run(running, check=True, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL)
    finally:
        twins.terminate()
        twins.wait(10)
    recipe, drivers = load_recipe(recipe_path), find_drivers()
    entry = load_rig(rig_path, drivers, find_bench_factory()).entry("part mount")
    assert entry is not None
    stage = drivers[entry.driver].capabilities(entry.options)
    assert isinstance(stage, StageCapabilities)
    visits = load_run(run_path).visits("data")
    took_s = visits[-1].ended_s - visits[0].ended_s
    least_s = needed_s(recipe, stage)
    extra_ms = 1e3 * (took_s - least_s) / (len(visits) - 1)
    print(f"{what}: {len(visits)} visits in {took_s:.3f} s; motion, settling and dwell {least_s:.3f} s;")
    print(f"  overhead {100 * (took_s / least_s - 1):.2f} %, {extra_ms:.1f} ms a visit")


THREE_METERS = """
recipe: three meters of 100 ms
roles:
  part mount: rotation stage
  signal: power meter
  monitor: power meter
  second monitor: power meter
source: {wavelength: 785.2 nm, power: 2 mW +- 20 %}
optics:
  - polarizer: {name: entry polarizer, axis: 0 deg, extinction ratio: 100000:1 +- 30 %}
  - pick-off: {name: first, to: monitor, fraction: 0.04 +- 0.002}
  - pick-off: {name: second, to: second monitor, fraction: 0.04 +- 0.002}
  - polarizer: {name: part, turned by: part mount, extinction ratio: 1000:1, unknown: [extinction ratio, dial offset]}
  - detector: {role: signal}
sweep: [{part mount: {turn: 1, step: 12 deg, approach: from below, settle: 150 ms}}]
dwell: {time: 400 ms, at least: 4 readings}
"""
THREE_WIRES = """
rig: three meters
instruments:
  mount 1: {driver: gcode-rotary, at: "serial:///dev/ttyUSB0?baud=115200", speed: 40 deg/s, acceleration: 200 deg/s2}
  head 1: {driver: scpi-power-meter, at: tcp://127.0.0.1:5002}
  head 2: {driver: scpi-power-meter, at: tcp://127.0.0.1:5003}
  head 3: {driver: scpi-power-meter, at: "serial:///dev/ttyUSB1?baud=460800"}
roles: {part mount: mount 1, signal: head 1, monitor: head 2, second monitor: head 3}
"""


def main() -> None:
    one = (ROOT / "recipes/quarter-wave-plate.yaml").read_text(encoding="utf-8").replace("step: 5 deg", "step: 12 deg")
    cellar = (ROOT / "recipes/rigs/cellar-bench.yaml").read_text(encoding="utf-8")
    with tempfile.TemporaryDirectory() as name:
        measure(Path(name), one, cellar, "one meter over TCP")
    with tempfile.TemporaryDirectory() as name:
        measure(Path(name), THREE_METERS, THREE_WIRES, "three meters of 100 ms over TCP and pseudo-terminals")


if __name__ == "__main__":
    main()
