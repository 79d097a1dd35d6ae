"""A good recipe, a good rig file, and drivers and a bench that stand in for real ones."""

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from typing import Any, NoReturn

import pytest

from rigctl.errors import FileError
from rigctl.files import parse_recipe, parse_rig
from rigctl.files.recipe import Recipe
from rigctl.files.rig import Rig
from rigctl.interfaces import (
    Capabilities,
    Driver,
    MeterCapabilities,
    Option,
    Options,
    RoleKind,
    ShutterCapabilities,
    StageCapabilities,
)
from rigctl.links.channel import Channel
from rigctl.links.family import Opening, Resynced

RECIPE = """\
recipe: sheet polarizer on a turning mount
roles:
  part mount: rotation stage
  signal: power meter
  shutter: {is: shutter, optional: true}
source: {wavelength: 785.2 nm +- 0.3 nm, power: 2 mW +- 30 %}
optics:
  - polarizer: {name: entry polarizer, axis: 0 deg, extinction ratio: 100000:1 +- 30 %}
  - polarizer: {name: part, turned by: part mount, extinction ratio: 1000:1,
                unknown: [extinction ratio, dial offset]}
  - detector: {role: signal}
sweep: [{part mount: {turn: 1, step: 5 deg, approach: from below, settle: 150 ms}}]
dwell: {time: 400 ms, at least: 4 readings}
dark: {by: shutter, before: true, after: true}
"""

RIG = """\
rig: bench 2
instruments:
  mount 1: {driver: turner, at: "tcp://10.0.0.5:23", channel: B, positive: clockwise, travel: -10 to 400 deg}
  head 7: {driver: meter, at: tcp://10.0.0.7:5025, ranges: [20 uW, 2 mW], limits: {power: 5 mW},
           calibration: {certificate: K-2291, due: 2027-03-01, expanded uncertainty: 3 %, coverage factor: 2}}
  shutter 1: {driver: flap, at: tcp://10.0.0.8:5025, channel: 3}
roles: {part mount: mount 1, signal: head 7, shutter: shutter 1}
simulated: {seed: 7, room light: 2 uW, head 7: {offset: 30 nW}}
"""


@dataclass(frozen=True)
class StubFamily:
    name: str
    reply_timeout_s: float = 1.0
    longest_s: float = 1.0
    opening: Opening = field(default_factory=Opening)

    def resync(self, channel: Channel, deadline_s: float) -> Resynced:
        return Resynced()


def _never_opened(link: object, options: Options) -> NoReturn:
    raise AssertionError("reading files opens no instrument")


def _driver(name: str, kind: RoleKind, can: Callable[[Options], Capabilities], **options: Option) -> Driver:
    table = {key.replace("_", " "): option for key, option in options.items()}
    return Driver(name, kind, StubFamily(f"{name} talk"), table, can, _never_opened)


def _turner(options: Options) -> StageCapabilities:
    low, high = options["travel"]
    return StageCapabilities((low, high), 20.0, 100.0, backlash_deg=options["backlash"], resolution_deg=0.001)


def _meter(options: Options) -> MeterCapabilities:
    ranges = options["ranges"]
    return MeterCapabilities(ranges, (0.01,) * len(ranges), (1e-9,) * len(ranges), 1e-4, ranges[-1], (1e-3, 1.0))


def _drivers() -> dict[str, Driver]:
    senses = ("clockwise", "counter-clockwise")
    turner = _driver(
        "turner",
        "rotation stage",
        _turner,
        channel=Option("text", default="A"),
        positive=Option("choice", default="counter-clockwise", choices=senses),
        travel=Option("span of angle", default=(-3600.0, 3600.0)),
        backlash=Option("angle", default=0.1),
    )
    meter = _driver("meter", "power meter", _meter, ranges=Option("list of power", default=(1e-3,)))
    flap = _driver("flap", "shutter", lambda _: ShutterCapabilities(0.02), channel=Option("whole number", default=1))
    return {driver.name: driver for driver in (turner, meter, flap)}


DRIVERS: Mapping[str, Driver] = _drivers()


class StubBench:
    def twin_options(self, driver: str) -> Mapping[str, Option]:
        return {"offset": Option("power", default=0.0)} if driver == "meter" else {}

    def bench_options(self) -> Mapping[str, Option]:
        return {"room light": Option("power", default=0.0), "drift": Option("drift")}

    def default_rig(self, roles: Mapping[str, RoleKind]) -> NoReturn:
        raise AssertionError("reading files asks for no default")

    def build(self, recipe: Any, rig: Any, seed: int) -> NoReturn:
        raise AssertionError("reading files builds no bench")


Changes = Mapping[str, str]
NOTHING: Changes = {}


def replaced(text: str, changes: Changes) -> str:
    """Return a text with pieces replaced, each of which must be in it."""
    for old, new in changes.items():
        assert old in text
        text = text.replace(old, new, 1)
    return text


def recipe(changes: Changes = NOTHING) -> Recipe:
    """Read the good recipe after some pieces of it were replaced."""
    return parse_recipe(replaced(RECIPE, changes), "r.yaml")


def rig(changes: Changes = NOTHING) -> Rig:
    """Read the good rig file after some pieces of it were replaced."""
    return parse_rig(replaced(RIG, changes), "b.yaml", DRIVERS, StubBench())


def told(read: Callable[[], object]) -> list[str]:
    """Return the lines of the complaint that reading raises."""
    with pytest.raises(FileError) as caught:
        read()
    return str(caught.value).splitlines()
