"""The command in another process, and simulated instruments that it can reach."""

import re
import socket
import subprocess
import sys
import time
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path

COMMAND = (sys.executable, "-m", "rigctl")
RECIPE = """
recipe: short sweep of a sheet polarizer
roles: {part mount: rotation stage, signal: power meter, shutter: {is: shutter, optional: true}}
source: {wavelength: 785.2 nm, power: 2 mW +- 20 %}
optics:
  - polarizer: {name: entry polarizer, axis: 0 deg, extinction ratio: 100000:1 +- 30 %}
  - polarizer: {name: part, turned by: part mount, extinction ratio: 1000:1, unknown: [extinction ratio, dial offset]}
  - detector: {role: signal}
sweep: [{part mount: {turn: 1, step: 30 deg, approach: from below}}]
dwell: {time: 100 ms, at least: 4 readings}
dark: {by: shutter, before: true, after: true}
"""
RIG = """
rig: bench of the command line tests
instruments:
  mount 1: {driver: gcode-rotary, at: tcp://127.0.0.1:5001, speed: 200 deg/s, acceleration: 2000 deg/s2}
  head 1: {driver: scpi-power-meter, at: tcp://127.0.0.1:5002}
  shutter 1: {driver: scpi-switch, at: tcp://127.0.0.1:5003, channel: 3}
roles: {part mount: mount 1, signal: head 1, shutter: shutter 1}
"""


@dataclass(frozen=True)
class Twins:
    """Simulated instruments being served: the recipe, the rig file that reaches them, and the rig they stand for."""

    recipe: Path
    rig: Path
    original: Path

    def port(self, instrument: str) -> int:
        found = re.search(rf"{instrument}: {{[^}}]*tcp://127.0.0.1:(\d+)", self.rig.read_text(encoding="utf-8"))
        assert found is not None
        return int(found[1])

    def is_shutter_closed(self) -> bool:
        """Ask the twin on a connection of its own; the run must have let go of the port."""
        with socket.create_connection(("127.0.0.1", self.port("shutter 1")), timeout=5.0) as wire:
            wire.sendall(b"ROUTE:CLOSE? (@3)\n")
            return wire.recv(100) == b"0\n"


def polrig(*arguments: str | Path, timeout: float = 60.0) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [*COMMAND, *map(str, arguments)], capture_output=True, text=True, check=False, timeout=timeout,
        stdin=subprocess.DEVNULL,
    )  # fmt: skip


@contextmanager
def serving(folder: Path, recipe_text: str = RECIPE, rig_text: str = RIG) -> Iterator[Twins]:
    recipe, original, rig = folder / "recipe.yaml", folder / "rig.yaml", folder / "twins.yaml"
    recipe.write_text(recipe_text, encoding="utf-8")
    original.write_text(rig_text, encoding="utf-8")
    arguments = ["simulate", original, "--recipe", recipe, "--write", rig]
    process = subprocess.Popen([*COMMAND, *map(str, arguments)], stdout=subprocess.PIPE, text=True)
    assert process.stdout is not None
    try:
        assert process.stdout.readline().startswith("ready")
        yield Twins(recipe, rig, original)
    finally:
        process.terminate()
        process.wait(10.0)
        process.stdout.close()


def wait_for_visits(journal: Path, count: int, *, timeout_s: float = 30.0) -> None:
    """Wait until a journal holds some visits."""
    deadline = time.monotonic() + timeout_s
    while time.monotonic() < deadline:
        if journal.exists() and journal.read_bytes().count(b'"kind":"visit"') >= count:
            return
        time.sleep(0.02)
    raise AssertionError(f"{journal} never held {count} visits")
