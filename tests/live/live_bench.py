"""A full bench for live tests: twins served in this process, so that a test can look at the diode itself."""

import subprocess
import sys
import threading
import time
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path

from rigctl.files import match, parse_recipe, parse_rig
from rigctl.interfaces import Bench
from rigctl.links.serve import TwinServer
from rigctl.plugins import find_bench_factory, find_drivers
from rigctl.runner.simulation import rig_text_with_addresses
from rigctl.timeline import StopRequest, WallTimeline

COMMAND = (sys.executable, "-m", "rigctl")
RECIPE = """
recipe: live test of a driven bench
roles:
  part mount: rotation stage
  signal: power meter
  diode: current source
  diode tec: temperature controller
  shutter: shutter
source: {wavelength: 785.2 nm, power: 2 mW +- 20 %, driven by: diode, cooled by: diode tec}
optics:
  - polarizer: {name: entry polarizer, axis: 0 deg, extinction ratio: 100000:1 +- 30 %}
  - polarizer: {name: part, turned by: part mount, extinction ratio: 1000:1, unknown: [extinction ratio, dial offset]}
  - detector: {role: signal}
prepare:
  - diode tec: {to: 22 degC, steady: {within: 2 K, for: 1 s, give up after: 60 s}}
  - diode: {to: 34 mA, ramp: 40 mA/s, warm-up: 200 ms}
sweep: [{part mount: {turn: 1, step: 10 deg, approach: from below}}]
dwell: {time: 40 ms, at least: 4 readings}
dark: {by: shutter, before: true, after: true}
"""
RIG = """
rig: bench of the live tests
instruments:
  mount 1: {{driver: gcode-rotary, at: "{mount}", speed: 400 deg/s, acceleration: 4000 deg/s2}}
  head 1: {{driver: scpi-power-meter, at: "tcp://127.0.0.1:5002"}}
  source 1: {{driver: scpi-current-source, at: "{source}", channel: 1}}
  tec 1: {{driver: scpi-temperature-controller, at: "{source}", channel: 2}}
  shutter 1: {{driver: scpi-switch, at: "{shutter}", channel: 3}}
diodes:
  D-1:
    on: source 1
    limits: {{current: 45 mA, compliance: 2.5 V, temperature: 10 degC to 40 degC}}
    class on label: 3B
roles: {{part mount: mount 1, signal: head 1, diode: source 1, diode tec: tec 1, shutter: shutter 1}}
"""
WIRES = {
    "tcp": {"mount": "tcp://127.0.0.1:5001", "source": "tcp://127.0.0.1:5003", "shutter": "tcp://127.0.0.1:5004"},
    "serial": {
        "mount": "serial:///dev/ttyUSB0?baud=115200",
        "source": "serial:///dev/ttyUSB1?baud=115200",
        "shutter": "tcp://127.0.0.1:5004",
    },
}


@dataclass(frozen=True)
class LiveBench:
    """Simulated instruments being served, with the bench behind them."""

    bench: Bench
    timeline: WallTimeline
    recipe: Path
    rig: Path

    def emits(self) -> bool:
        return self.bench.emits(self.timeline.now())

    def wait_until(self, *, emits: bool, timeout_s: float = 30.0) -> float:
        """Wait until the source is on or off; return how long it took, s."""
        began = time.monotonic()
        while self.emits() != emits:
            if time.monotonic() - began > timeout_s:
                raise AssertionError(f"the source never went {'on' if emits else 'off'}")
            time.sleep(0.005)
        return time.monotonic() - began

    def start_run(self, path: Path) -> "subprocess.Popen[str]":
        arguments = ["run", self.recipe, "--rig", self.rig, "--out", path, "--arm"]
        return subprocess.Popen(
            [*COMMAND, *map(str, arguments)], stdout=subprocess.PIPE, stderr=subprocess.PIPE, stdin=subprocess.DEVNULL,
            text=True,
        )  # fmt: skip


@contextmanager
def live_bench(folder: Path, *, wires: str = "tcp", recipe_text: str = RECIPE) -> Iterator[LiveBench]:
    drivers, factory = find_drivers(), find_bench_factory()
    rig_text = RIG.format(**WIRES[wires])
    recipe, rig = parse_recipe(recipe_text, "recipe.yaml"), parse_rig(rig_text, "rig.yaml", drivers, factory)
    match(recipe, rig, drivers)
    bench = factory.build(recipe, rig, 1)
    stop = StopRequest()
    timeline = WallTimeline(stop)
    twins = {entry.at: bench.twin(entry.at) for entry in rig.instruments.values()}
    with TwinServer(twins, timeline) as server:
        (folder / "recipe.yaml").write_text(recipe_text, encoding="utf-8")
        (folder / "rig.yaml").write_text(rig_text_with_addresses(rig, server.addresses), encoding="utf-8")
        thread = threading.Thread(target=server.serve)
        thread.start()
        try:
            yield LiveBench(bench, timeline, folder / "recipe.yaml", folder / "rig.yaml")
        finally:
            stop.request("the test is over")
            thread.join()
