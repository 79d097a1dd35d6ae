"""The simulated bench as the core meets it: built from a recipe and a rig, asked over its wires."""

import itertools
from collections.abc import Mapping
from typing import cast

import pytest
from twin_wire import Wire

from rigctl import __version__
from rigctl.errors import PlanError
from rigctl.files import parse_recipe, parse_rig
from rigctl.files.arrangement import train_of
from rigctl.files.recipe import Recipe
from rigctl.files.rig import Rig
from rigctl.interfaces import Bench, Driver, Option
from rigctl.optics import reader
from rigctl.plugins import find_bench_factory, find_drivers
from rigctl_sim.bench import FACTORY, SimulatedBenchFactory

RECIPE = """
recipe: plate between polarizers
roles: {part mount: rotation stage, signal: power meter, shutter: shutter}
source: {wavelength: 785 nm, power: 1 mW}
optics:
  - polarizer: {name: entry, axis: 0 deg, extinction ratio: 1000:1}
  - retarder: {name: part, turned by: part mount, retardance: 0.25 waves, unknown: [retardance, dial offset]}
  - polarizer: {name: exit, axis: 0 deg, extinction ratio: 1000:1}
  - detector: {role: signal}
sweep: [{part mount: {turn: 1, step: 10 deg}}]
dwell: {time: 400 ms, at least: 4 readings}
dark: {by: shutter}
"""

RIG = """
rig: bench
instruments:
  mount 1: {driver: gcode-rotary, at: tcp://127.0.0.1:5001, positive: POSITIVE, homing: HOMING}
  head 1: {driver: scpi-power-meter, at: tcp://127.0.0.1:5002, ranges: [2 uW, 200 uW, 2 mW]}
  shutter 1: {driver: scpi-switch, at: tcp://127.0.0.1:5003, channel: 3, at rest: open}
MORE
roles: {part mount: mount 1, signal: head 1, shutter: shutter 1}
simulated: {SIMULATED}
"""
COUNTER_CLOCKWISE = "counter-clockwise to an eye facing the light"
CLOCKWISE = "clockwise to an eye facing the light"
QUIET = "head 1: {noise: 1e-6 pW, relative noise: 0}"
MOUNT, HEAD, SHUTTER = (f"tcp://127.0.0.1:{port}" for port in (5001, 5002, 5003))


@pytest.fixture(scope="module")
def drivers() -> Mapping[str, Driver]:
    return find_drivers()


@pytest.fixture(scope="module")
def recipe() -> Recipe:
    return parse_recipe(RECIPE, "recipe.yaml")


def make_rig(
    drivers: Mapping[str, Driver],
    simulated: str = "",
    *,
    positive: str = COUNTER_CLOCKWISE,
    more: str = "",
    homing: str = "never",
) -> Rig:
    text = RIG.replace("POSITIVE", positive).replace("HOMING", homing).replace("MORE", more)
    return parse_rig(text.replace("SIMULATED", simulated), "rig.yaml", drivers, FACTORY)


def read_power_w(bench: Bench, *, at_s: float) -> float:
    """Read the head once, long after everything has come to rest."""
    wire = Wire(bench.twin(HEAD), now_s=at_s)
    return float(wire.ask(b"POW:RANG:AUTO ON;:POW:APER 0.1;:READ?"))


def turn(bench: Bench, angle_deg: float, *, at_s: float) -> None:
    wire = Wire(bench.twin(MOUNT), now_s=at_s)
    assert wire.ask(b"G90 G0 A%.3f" % angle_deg) == "ok"


def expected_w(recipe: Recipe, truth: Mapping[str, float], angle_deg: float, *, at_s: float) -> float:
    """What the optics say of the truth: light and stray light, the source at that instant."""
    power_w = truth["source.power"] * (1.0 + truth["source.drift"] * at_s / 3600.0)
    (light_w,) = reader(train_of(recipe), truth)({"part mount": angle_deg}, power_w)
    return light_w + truth["signal.stray light"]


def test_the_factory_is_found_by_its_entry_point() -> None:
    assert isinstance(find_bench_factory("polrig"), SimulatedBenchFactory)


@pytest.mark.parametrize("angle_deg", [0.0, 17.5, -133.0])
def test_the_head_reads_what_the_optics_say_of_the_truth(
    recipe: Recipe, drivers: Mapping[str, Driver], angle_deg: float
) -> None:
    bench = FACTORY.build(recipe, make_rig(drivers, QUIET), 3)

    turn(bench, angle_deg, at_s=1.0)

    expected = expected_w(recipe, bench.truth(), angle_deg, at_s=60.0)
    assert read_power_w(bench, at_s=60.0) == pytest.approx(expected, rel=1e-6)


def test_a_mount_that_counts_clockwise_turns_the_other_way(recipe: Recipe, drivers: Mapping[str, Driver]) -> None:
    bench = FACTORY.build(recipe, make_rig(drivers, QUIET, positive=CLOCKWISE), 3)

    turn(bench, 17.5, at_s=1.0)

    expected = expected_w(recipe, bench.truth(), -17.5, at_s=60.0)
    assert read_power_w(bench, at_s=60.0) == pytest.approx(expected, rel=1e-6)


def test_with_the_shutter_closed_only_stray_light_is_read(recipe: Recipe, drivers: Mapping[str, Driver]) -> None:
    bench = FACTORY.build(recipe, make_rig(drivers, QUIET), 3)

    Wire(bench.twin(SHUTTER)).send(b"ROUT:CLOS (@3)\n", at_s=1.0)

    stray_w = bench.truth()["signal.stray light"]
    assert read_power_w(bench, at_s=60.0) == pytest.approx(stray_w, rel=1e-6)


def test_with_a_hand_in_the_beam_only_stray_light_is_read(recipe: Recipe, drivers: Mapping[str, Driver]) -> None:
    bench = FACTORY.build(recipe, make_rig(drivers, QUIET), 3)
    bright_w = read_power_w(bench, at_s=1.0)

    bench.block_by_hand(True, 2.0)
    dark_w = read_power_w(bench, at_s=60.0)
    bench.block_by_hand(False, 100.0)

    assert dark_w == pytest.approx(bench.truth()["signal.stray light"], rel=1e-6)
    assert read_power_w(bench, at_s=160.0) == pytest.approx(bright_w, rel=1e-3)


def test_a_dwell_begun_right_after_a_move_reads_the_tail_of_the_old_level(
    recipe: Recipe, drivers: Mapping[str, Driver]
) -> None:
    quiet = "head 1: {noise: 1e-6 pW, relative noise: 0, time constant: 200 ms}"
    benches = [FACTORY.build(recipe, make_rig(drivers, quiet), 3) for _ in range(2)]
    moves_s = 60.0 / 20.0 + 0.2

    for bench in benches:
        turn(bench, 60.0, at_s=1.0)
    early_w = read_power_w(benches[0], at_s=1.0 + moves_s)
    late_w = read_power_w(benches[1], at_s=1.0 + moves_s + 10.0)

    before_w = expected_w(recipe, benches[0].truth(), 0.0, at_s=1.0)
    assert abs(early_w - late_w) > 0.02 * abs(before_w - late_w)


def traffic(bench: Bench) -> bytes:
    """Some bytes of every instrument."""
    turn(bench, 30.0, at_s=1.0)
    wires = [Wire(bench.twin(address), now_s=9.0) for address in (MOUNT, HEAD, SHUTTER)]
    asked = (b"?$I\n", b"TRIG:COUN 20;:READ?;*IDN?\n", b"ROUT:CLOS? (@1:8);*IDN?\n")
    for wire, data in zip(wires, asked, strict=True):
        wire.send(data)
    return b"".join(wire.gather() for wire in wires)


def test_the_same_seed_gives_the_same_bytes(recipe: Recipe, drivers: Mapping[str, Driver]) -> None:
    first, second = (FACTORY.build(recipe, make_rig(drivers), 7) for _ in range(2))

    assert traffic(first) == traffic(second)
    assert first.truth() == second.truth()


def test_another_seed_gives_other_bytes(recipe: Recipe, drivers: Mapping[str, Driver]) -> None:
    first, second = (FACTORY.build(recipe, make_rig(drivers), seed) for seed in (7, 8))

    assert traffic(first) != traffic(second)


def test_one_instrument_more_leaves_the_others_as_they_were(recipe: Recipe, drivers: Mapping[str, Driver]) -> None:
    more = "  head 2: {driver: scpi-power-meter, at: tcp://127.0.0.1:5009}"
    alone = FACTORY.build(recipe, make_rig(drivers), 7)
    beside = FACTORY.build(recipe, make_rig(drivers, more=more), 7)
    Wire(beside.twin("tcp://127.0.0.1:5009")).ask(b"READ?")

    assert traffic(alone) == traffic(beside)


def test_twins_say_that_they_are_simulated_and_who_they_are(recipe: Recipe, drivers: Mapping[str, Driver]) -> None:
    bench = FACTORY.build(recipe, make_rig(drivers), 7)

    identities = [Wire(bench.twin(address)).ask(b"*IDN?") for address in (HEAD, SHUTTER)]

    assert identities == [
        f"polrig,simulated power meter,head 1,{__version__}",
        f"polrig,simulated switch,shutter 1,{__version__}",
    ]
    assert Wire(bench.twin(MOUNT)).ask(b"$I").startswith("[VER:1.1:simulated mount,mount 1]")


def test_a_name_that_would_break_a_reply_is_written_plainly(recipe: Recipe, drivers: Mapping[str, Driver]) -> None:
    more = '  "Messkopf grün, 2;": {driver: scpi-power-meter, at: tcp://127.0.0.1:5009}'
    bench = FACTORY.build(recipe, make_rig(drivers, more=more), 7)

    answer = Wire(bench.twin("tcp://127.0.0.1:5009")).ask(b"*IDN?")

    assert answer.split(",")[2] == "Messkopf gr_n_ 2_"


def test_a_head_that_no_role_needs_reads_next_to_nothing(recipe: Recipe, drivers: Mapping[str, Driver]) -> None:
    more = "  head 2: {driver: scpi-power-meter, at: tcp://127.0.0.1:5009, noise: 1 pW}"
    bench = FACTORY.build(recipe, make_rig(drivers, more=more), 7)

    level_w = float(Wire(bench.twin("tcp://127.0.0.1:5009")).ask(b"POW:RANG MIN;:READ?"))

    assert abs(level_w) < 6e-12


def test_two_axes_of_one_controller_share_a_twin(recipe: Recipe, drivers: Mapping[str, Driver]) -> None:
    more = f"  mount 2: {{driver: gcode-rotary, at: {MOUNT}, channel: B}}"
    bench = FACTORY.build(recipe, make_rig(drivers, QUIET, more=more), 3)
    before_w = read_power_w(bench, at_s=1.0)
    wire = Wire(bench.twin(MOUNT), now_s=2.0)

    wire.send(b"G0 B30\n")
    wire.send(b"?", at_s=20.0)

    assert "MPos:0.000,0.000,0.000,0.000,30.000|" in wire.gather().decode()
    assert read_power_w(bench, at_s=20.0) == pytest.approx(before_w, rel=1e-4)


def test_two_shutters_of_one_card_share_a_twin(recipe: Recipe, drivers: Mapping[str, Driver]) -> None:
    more = f"  shutter 2: {{driver: scpi-switch, at: {SHUTTER}, channel: 4}}"
    bench = FACTORY.build(recipe, make_rig(drivers, QUIET, more=more), 3)
    before_w = read_power_w(bench, at_s=1.0)

    Wire(bench.twin(SHUTTER)).send(b"ROUT:CLOS (@4)\n", at_s=2.0)

    assert read_power_w(bench, at_s=20.0) == pytest.approx(before_w, rel=1e-4)


@pytest.mark.parametrize("driver", ["scpi-power-meter", "scpi-switch"])
def test_what_cannot_share_an_address_is_refused_with_the_address(
    recipe: Recipe, drivers: Mapping[str, Driver], driver: str
) -> None:
    more = f"  second: {{driver: {driver}, at: {HEAD}}}"

    with pytest.raises(PlanError, match="at one address") as caught:
        FACTORY.build(recipe, make_rig(drivers, more=more), 3)

    assert HEAD in str(caught.value)
    assert "address of its own" in str(caught.value)


def test_the_options_of_the_rig_hold_for_the_twins(recipe: Recipe, drivers: Mapping[str, Driver]) -> None:
    bench = FACTORY.build(recipe, make_rig(drivers), 3)

    bounds = Wire(bench.twin(HEAD)).ask(b"POW:RANG? MIN;:POW:RANG? MAX")
    settings = Wire(bench.twin(MOUNT)).ask_lines(b"$$")

    assert bounds == "2.000000E-06;2.000000E-03"
    assert {"$103=1000.000", "$113=1200.000", "$123=100.000", "$133=7200.000"} <= set(settings)


def test_a_mount_that_a_run_homes_was_left_anywhere(recipe: Recipe, drivers: Mapping[str, Driver]) -> None:
    bench = FACTORY.build(recipe, make_rig(drivers, QUIET, homing="at start"), 3)
    before_w = read_power_w(bench, at_s=1.0)

    wire = Wire(bench.twin(MOUNT), now_s=2.0)
    assert wire.ask(b"$H") == "ok"

    homed_w = read_power_w(bench, at_s=60.0)
    expected = expected_w(recipe, bench.truth(), 0.0, at_s=60.0)
    assert homed_w == pytest.approx(expected, rel=1e-6)
    assert before_w != pytest.approx(homed_w, rel=1e-3)


def test_the_rig_file_can_set_power_drift_and_stray_light(recipe: Recipe, drivers: Mapping[str, Driver]) -> None:
    simulated = "power: 3 mW, drift: 1 %/h, head 1: {stray light: 7 nW}"
    truth = FACTORY.build(recipe, make_rig(drivers, simulated), 3).truth()

    found = [truth[name] for name in ("source.power", "source.drift", "signal.stray light")]

    assert found == pytest.approx([3e-3, 1e-2, 7e-9])


def test_the_rig_file_can_set_the_noise_of_a_head(recipe: Recipe, drivers: Mapping[str, Driver]) -> None:
    loud = FACTORY.build(recipe, make_rig(drivers, "head 1: {noise: 5 uW}"), 3)

    levels = [read_power_w(loud, at_s=float(instant)) for instant in range(1, 200)]

    spread = max(levels) - min(levels)
    # two hundred normal numbers span 4 to 8 standard deviations, but for one seed in a million
    assert 4 * 5e-6 < spread < 8 * 5e-6


def test_every_key_of_simulated_has_a_meaning() -> None:
    tables = [FACTORY.bench_options(), *(FACTORY.twin_options(name) for name in find_drivers())]

    options = cast(list[Option], list(itertools.chain(*(table.values() for table in tables))))

    assert all(option.meaning for option in options)


def test_a_driver_of_somebody_else_has_no_keys() -> None:
    assert FACTORY.twin_options("another-driver") == {}
