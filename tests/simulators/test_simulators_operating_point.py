"""Where a recipe uses its diode, and what is drawn of the diode there."""

from collections.abc import Mapping
from dataclasses import replace

import pytest

from rigctl.files import parse_recipe, parse_rig
from rigctl.files.recipe import Recipe
from rigctl.files.rig import InstrumentEntry, Rig
from rigctl.interfaces import Driver
from rigctl.plugins import find_drivers
from rigctl_sim.bench import FACTORY
from rigctl_sim.diode import Diode
from rigctl_sim.operating_point import (
    CHARACTERISTIC_K,
    THRESHOLD_PART,
    diode_of,
    prepared_current_a,
    prepared_temperature_c,
)

RECIPE = """
recipe: diode
roles: {{signal: power meter, diode: current source, diode tec: temperature controller}}
source: {{wavelength: 785 nm, power: 2 mW, driven by: diode, cooled by: diode tec}}
optics: [{{detector: {{role: signal}}}}]
{prepare}
sweep: {sweep}
dwell: {{time: 400 ms, at least: 4 readings}}
"""
RIG = """
rig: bench
instruments:
  head 1: {driver: scpi-power-meter, at: tcp://127.0.0.1:5001}
  source 1: {driver: scpi-current-source, at: tcp://127.0.0.1:5002, largest current: 120 mA}
  tec 1: {driver: scpi-temperature-controller, at: tcp://127.0.0.1:5003}
diodes: {D-1: {on: source 1, limits: {current: 100 mA}, class on label: 3B}}
roles: {signal: head 1, diode: source 1, diode tec: tec 1}
ROOM
simulated: {SIMULATED}
"""
ROOM = "room: {temperature: 19.5 degC, humidity: 40 %}"
PREPARED = "prepare: [{diode tec: {to: 24 degC}}, {diode: {to: 34 mA}}]"
SWEEP = "[{diode tec: {values: [20 degC, 30 degC]}}, {diode: {values: [0 mA, 50 mA, 20 mA]}}]"
REPEAT = "[{repeat: 2}]"


@pytest.fixture(scope="module")
def drivers() -> Mapping[str, Driver]:
    return find_drivers()


def make_recipe(prepare: str, sweep: str) -> Recipe:
    return parse_recipe(RECIPE.format(prepare=prepare, sweep=sweep), "recipe.yaml")


def make_rig(drivers: Mapping[str, Driver], simulated: str = "", room: str = ROOM) -> Rig:
    return parse_rig(RIG.replace("SIMULATED", simulated).replace("ROOM", room), "rig.yaml", drivers, FACTORY)


def source_of(rig: Rig) -> InstrumentEntry:
    return rig.instruments["source 1"]


def make_diode(drivers: Mapping[str, Driver], simulated: str = "", *, seed: int = 1) -> Diode:
    rig = make_rig(drivers, simulated)
    return diode_of(make_recipe(PREPARED, REPEAT), rig, source_of(rig), power_w=2e-3, seed=seed)


@pytest.mark.parametrize(
    ("prepare", "sweep", "milliamps"), [(PREPARED, SWEEP, 34.0), (PREPARED, REPEAT, 34.0), ("", SWEEP, 50.0)]
)
def test_the_current_is_the_prepared_one_else_the_largest_swept(prepare: str, sweep: str, milliamps: float) -> None:
    found_a = prepared_current_a(make_recipe(prepare, sweep))

    assert 1e3 * found_a == pytest.approx(milliamps)


@pytest.mark.parametrize(
    ("prepare", "sweep", "celsius"), [(PREPARED, SWEEP, 24.0), (PREPARED, REPEAT, 24.0), ("", SWEEP, 20.0)]
)
def test_the_temperature_is_the_prepared_one_else_the_first_swept(
    drivers: Mapping[str, Driver], prepare: str, sweep: str, celsius: float
) -> None:
    assert prepared_temperature_c(make_recipe(prepare, sweep), make_rig(drivers)) == celsius


@pytest.mark.parametrize(("room", "celsius"), [(ROOM, 19.5), ("", 22.0)])
def test_a_diode_that_nothing_cools_is_as_warm_as_the_room(
    drivers: Mapping[str, Driver], room: str, celsius: float
) -> None:
    text = RECIPE.replace("diode tec: temperature controller", "").replace(", cooled by: diode tec", "")
    recipe = parse_recipe(text.format(prepare="prepare: [{diode: {to: 34 mA}}]", sweep=REPEAT), "recipe.yaml")

    assert prepared_temperature_c(recipe, make_rig(drivers, room=room)) == celsius


def test_a_rig_without_its_controller_leaves_the_diode_to_the_room(drivers: Mapping[str, Driver]) -> None:
    rig = make_rig(drivers)
    bare = replace(rig, roles={role: name for role, name in rig.roles.items() if role != "diode tec"})

    assert prepared_temperature_c(make_recipe(PREPARED, REPEAT), bare) == 19.5


def test_there_the_diode_has_its_power(drivers: Mapping[str, Driver]) -> None:
    assert make_diode(drivers).power_at(34e-3, 24.0) == pytest.approx(2e-3, rel=1e-12)


def test_what_is_drawn_of_it_is_usual(drivers: Mapping[str, Driver]) -> None:
    diodes = [make_diode(drivers, seed=seed) for seed in range(60)]

    parts = [diode.threshold_a / diode.current_a for diode in diodes]
    characteristic_k = [diode.characteristic_k for diode in diodes]

    assert THRESHOLD_PART[0] <= min(parts) < max(parts) <= THRESHOLD_PART[1]
    assert CHARACTERISTIC_K[0] <= min(characteristic_k) < max(characteristic_k) <= CHARACTERISTIC_K[1]


def test_the_same_seed_draws_the_same_diode(drivers: Mapping[str, Driver]) -> None:
    assert make_diode(drivers, seed=4) == make_diode(drivers, seed=4) != make_diode(drivers, seed=5)


def test_the_rig_file_may_say_what_the_diode_is(drivers: Mapping[str, Driver]) -> None:
    diode = make_diode(drivers, "source 1: {threshold: 12 mA, characteristic temperature: 60 K}")

    assert (diode.threshold_a, diode.characteristic_k) == pytest.approx((12e-3, 60.0))


def test_one_value_from_the_rig_file_leaves_the_other_as_it_was(drivers: Mapping[str, Driver]) -> None:
    given = make_diode(drivers, "source 1: {threshold: 12 mA}")

    assert given.characteristic_k == make_diode(drivers).characteristic_k
