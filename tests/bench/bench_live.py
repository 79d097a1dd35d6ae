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


def main() -> None:
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        recipe_path, rig_path, run_path = folder / "recipe.yaml", folder / "twins.yaml", folder / "run.h5"
        text = (ROOT / "recipes/quarter-wave-plate.yaml").read_text(encoding="utf-8")
        recipe_path.write_text(text.replace("step: 5 deg", "step: 12 deg"), encoding="utf-8")
        rig = ROOT / "recipes/rigs/cellar-bench.yaml"
        twins = subprocess.Popen([*COMMAND, "simulate", rig, "--recipe", recipe_path, "--write", rig_path])
        try:
            while not rig_path.exists():
                time.sleep(0.05)
            subprocess.run([*COMMAND, "run", recipe_path, "--rig", rig_path, "--arm", "--out", run_path], check=True)
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
        print(f"{len(visits)} visits over TCP: {took_s:.3f} s; motion, settling and dwell {least_s:.3f} s")
        extra_ms = 1e3 * (took_s - least_s) / (len(visits) - 1)
        print(f"overhead {100 * (took_s / least_s - 1):.2f} %, {extra_ms:.1f} ms a visit")


if __name__ == "__main__":
    main()
