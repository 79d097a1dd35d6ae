"""Rehearsals for tests: a short sweep of the sheet polarizer, on channels that a test may wrap."""

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

from rigctl.files import match, parse_recipe, parse_rig
from rigctl.interfaces import Driver
from rigctl.links.channel import Channel
from rigctl.plugins import find_bench_factory, find_drivers
from rigctl.runner.progress import Silent
from rigctl.runner.rehearsal import rehearsal_job
from rigctl.runner.run import Job
from rigctl.timeline import Timeline

RECIPE = """
recipe: short sweep of a sheet polarizer
roles: {part mount: rotation stage, signal: power meter, shutter: {is: shutter, optional: true}}
source: {wavelength: 785.2 nm, power: 2 mW +- 20 %}
optics:
  - polarizer: {name: entry polarizer, axis: 0 deg, extinction ratio: 100000:1 +- 30 %}
  - polarizer: {name: part, turned by: part mount, extinction ratio: 1000:1, unknown: [extinction ratio, dial offset]}
  - detector: {role: signal}
sweep: [{part mount: {turn: 1, step: 30 deg, approach: from below, settle: 150 ms}}]
dwell: {time: 400 ms, at least: 4 readings}
dark: {by: shutter, before: true, after: true}
"""
RIG = """
rig: test bench
instruments:
  mount 1: {driver: gcode-rotary, at: tcp://127.0.0.1:5001}
  head 1: {driver: scpi-power-meter, at: tcp://127.0.0.1:5002}
  shutter 1: {driver: scpi-switch, at: tcp://127.0.0.1:5003, channel: 3}
roles: {part mount: mount 1, signal: head 1, shutter: shutter 1}
"""
MOUNT, HEAD, SHUTTER = (f"tcp://127.0.0.1:{port}" for port in (5001, 5002, 5003))
VISITS = 12

Wrap = Callable[[Channel, Timeline], Channel]


def make_job(
    path: Path,
    *,
    seed: int = 1,
    recipe: str = RECIPE,
    rig: str = RIG,
    wrap: Wrap = lambda channel, _timeline: channel,
    drivers: dict[str, Driver] | None = None,
) -> Job:
    """A rehearsal of a recipe on a rig, both given as text."""
    found, factory = drivers or dict(find_drivers()), find_bench_factory()
    parsed = parse_recipe(recipe, "recipe.yaml")
    parsed_rig = parse_rig(rig, "rig.yaml", found, factory)
    match(parsed, parsed_rig, found)
    return rehearsal_job(
        parsed, parsed_rig, drivers=found, factory=factory, seed=seed, path=path, progress=Silent(), wrap=wrap
    )


def durable(job: Job) -> Job:
    """The same job, with every record on the disk at once."""
    return replace(job, is_durable=True)


class Meddler:
    """A channel that does something once, when the n-th write with some bytes in it passes."""

    def __init__(self, channel: Channel, act: Callable[[], None], *, at: bytes, nth: int) -> None:
        self.address = channel.address
        self._channel, self._act, self._at, self._left = channel, act, at, nth
        self.fired = 0

    def write(self, data: bytes, deadline_s: float) -> None:
        if self._at in data:
            self._left -= 1
            if self._left == 0:
                self.fired += 1
                self._act()
        self._channel.write(data, deadline_s)

    def readline(self, deadline_s: float) -> bytes:
        return self._channel.readline(deadline_s)

    def read_exact(self, count: int, deadline_s: float) -> bytes:
        return self._channel.read_exact(count, deadline_s)

    def discard(self) -> bytes:
        return self._channel.discard()

    def close(self) -> None:
        self._channel.close()


class Swallower(Meddler):
    """A channel on which some writes are lost on the way: those with some bytes in them, from the n-th on."""

    def __init__(self, channel: Channel, *, at: bytes, nth: int, count: int) -> None:
        super().__init__(channel, lambda: None, at=at, nth=nth)
        self._seen, self._first, self._count = 0, nth, count

    def write(self, data: bytes, deadline_s: float) -> None:
        if self._at in data:
            self._seen += 1
            if self._first <= self._seen < self._first + self._count:
                self.fired += 1
                return
        self._channel.write(data, deadline_s)
