"""A whole bench as the core meets it: driven diode, oven, monitor, slide; asked over its wires."""

import math
import statistics
from collections.abc import Mapping

import pytest
from twin_wire import Wire

from rigctl import __version__
from rigctl.errors import PlanError
from rigctl.files import parse_recipe, parse_rig
from rigctl.files.arrangement import train_of
from rigctl.files.recipe import Recipe
from rigctl.files.rig import Rig
from rigctl.interfaces import Bench, Driver
from rigctl.optics import reader
from rigctl.plugins import find_drivers
from rigctl_sim.bench import FACTORY

RECIPE = """
recipe: plate at temperatures
roles:
  part mount: rotation stage
  flip mount: rotation stage
  signal: power meter
  monitor: {is: power meter, optional: true}
  diode: current source
  diode tec: temperature controller
  oven: temperature controller
  shutter: shutter
  part slide: slide
source: {wavelength: 785 nm, power: 2 mW, driven by: diode, cooled by: diode tec}
optics:
  - polarizer: {name: entry, axis: 0 deg, extinction ratio: 1000:1}
  - pick-off: {to: monitor, fraction: 0.04 +- 0.002}
  - retarder:
      {name: part, turned by: part mount, warmed by: oven, taken out by: part slide, retardance: 0.25 waves,
       temperature coefficient: 1000 ppm/K, reference temperature: 25 degC, unknown: [retardance, dial offset]}
  - retarder: {name: plate, axis: 30 deg, retardance: 0.3 waves, taken out by: {flip mount: {in: 0 deg, out: 90 deg}}}
  - polarizer: {name: exit, axis: 20 deg, extinction ratio: 1000:1}
  - detector: {role: signal}
prepare:
  - diode tec: {to: 24 degC}
  - diode: {to: 34 mA}
steps:
  - name: empty
    without: part
    sweep: [{part mount: {values: [0 deg, 10 deg]}}]
  - name: plate
    sweep:
      - oven: {values: [22 degC, 28 degC]}
      - part mount: {turn: 1, step: 10 deg}
dwell: {time: 400 ms, at least: 4 readings}
dark: {by: shutter}
"""
RIG = """
rig: bench
instruments:
  mount 1: {driver: gcode-rotary, at: tcp://127.0.0.1:5001, positive: counter-clockwise to an eye facing the light}
  mount 2: {driver: gcode-rotary, at: tcp://127.0.0.1:5002, positive: clockwise to an eye facing the light}
  head 1: {driver: scpi-power-meter, at: tcp://127.0.0.1:5003, ranges: [2 uW, 200 uW, 20 mW]}
  head 2: {driver: scpi-power-meter, at: tcp://127.0.0.1:5004, ranges: [2 uW, 200 uW, 20 mW]}
  source 1: {driver: scpi-current-source, at: RACK, channel: 1}
  tec 1: {driver: scpi-temperature-controller, at: RACK, channel: 2, thermistor: "beta 3976 K, 10 kOhm at 25 degC"}
  shutter 1: {driver: scpi-switch, at: RACK, channel: 3, at rest: open}
  slide 1: {driver: scpi-slide, at: RACK, channel: 4, at rest: in}
  oven 1:
    {driver: scpi-temperature-controller, at: tcp://127.0.0.1:5006,
     thermistor: "A 1.12924e-3, B 2.34108e-4, C 8.7755e-8"}
MORE
diodes:
  D-118: {on: source 1, limits: {current: 45 mA, compliance: 2.5 V}, class on label: 3B}
roles:
  part mount: mount 1
  flip mount: mount 2
  signal: head 1
  monitor: head 2
  diode: source 1
  diode tec: tec 1
  oven: oven 1
  shutter: shutter 1
  part slide: slide 1
room: {temperature: 21 degC, humidity: 40 %}
simulated: {SIMULATED}
"""
MOUNT, FLIP, SIGNAL, MONITOR, RACK, OVEN = (f"tcp://127.0.0.1:{port}" for port in range(5001, 5007))
QUIET = "head 1: {noise: 1e-6 pW, relative noise: 0}, head 2: {noise: 1e-6 pW, relative noise: 0}, drift: 0 1/h"
ON = b"SOURCE1:CURRENT 0.034;:OUTPUT1 ON\n"
AT_24 = b"SOURCE2:TEMPERATURE:SPOINT 24;:SENSE2:TEMPERATURE:THERMISTOR:BETA 1E4,25,3976;:OUTPUT2 ON\n"
SETTLED_S = 1000.0


@pytest.fixture(scope="module")
def drivers() -> Mapping[str, Driver]:
    return find_drivers()


@pytest.fixture(scope="module")
def recipe() -> Recipe:
    return parse_recipe(RECIPE, "recipe.yaml")


def make_rig(drivers: Mapping[str, Driver], simulated: str = QUIET, *, more: str = "", without: str = "") -> Rig:
    lines = [line for line in RIG.splitlines() if not without or not line.startswith(without)]
    text = "\n".join(lines).replace("RACK", RACK).replace("MORE", more).replace("SIMULATED", simulated)
    return parse_rig(text, "rig.yaml", drivers, FACTORY)


@pytest.fixture
def bench(recipe: Recipe, drivers: Mapping[str, Driver]) -> Bench:
    return FACTORY.build(recipe, make_rig(drivers), 3)


def tell(bench: Bench, address: str, message: bytes, *, at_s: float) -> None:
    Wire(bench.twin(address)).send(message, at_s=at_s)


def switch_on(bench: Bench, *, at_s: float = 0.0) -> None:
    """Cool the diode as prepared, and drive it as prepared."""
    tell(bench, RACK, AT_24, at_s=at_s)
    tell(bench, RACK, ON, at_s=at_s)


def power_w(bench: Bench, address: str = SIGNAL, *, at_s: float) -> float:
    return float(Wire(bench.twin(address), now_s=at_s).ask(b"POW:RANG:AUTO ON;:POW:APER 0.1;:READ?"))


def expected_w(
    recipe: Recipe,
    bench: Bench,
    *,
    detector: str = "signal",
    source_w: float | None = None,
    angle_deg: float = 0.0,
    oven_c: float = 21.0,
    absent: frozenset[str] = frozenset(),
) -> float:
    """What the optics say of the truth."""
    train, truth = train_of(recipe), bench.truth()
    light_w = truth["source.power"] if source_w is None else source_w
    light = reader(train, truth)({"part mount": angle_deg}, light_w, {"oven": oven_c}, absent)
    names = [one.name for one in train.detectors]
    return light[names.index(detector)] + truth[f"{detector}.stray light"]


@pytest.mark.parametrize("detector", ["signal", "monitor"])
def test_as_prepared_the_source_has_its_true_power(recipe: Recipe, bench: Bench, detector: str) -> None:
    switch_on(bench)

    found = power_w(bench, SIGNAL if detector == "signal" else MONITOR, at_s=SETTLED_S)

    assert found == pytest.approx(expected_w(recipe, bench, detector=detector), rel=1e-6)


def test_nobody_drives_the_diode_at_first(bench: Bench) -> None:
    assert power_w(bench, at_s=SETTLED_S) == pytest.approx(bench.truth()["signal.stray light"], rel=1e-6)


def test_switched_off_only_stray_light_is_left(bench: Bench) -> None:
    switch_on(bench)

    tell(bench, RACK, b"OUTPUT1 OFF\n", at_s=SETTLED_S)

    found = power_w(bench, at_s=SETTLED_S + 10.0)
    assert found == pytest.approx(bench.truth()["signal.stray light"], rel=1e-6)


def test_the_power_is_a_straight_line_of_the_current_above_threshold(
    recipe: Recipe, drivers: Mapping[str, Driver]
) -> None:
    quiet = f"{QUIET}, source 1: {{threshold: 17 mA, characteristic temperature: 128 K}}"
    bench = FACTORY.build(recipe, make_rig(drivers, quiet), 3)
    switch_on(bench)
    found, expected = [], []

    for number, milliamps in enumerate((10.0, 17.0, 20.0, 25.5, 40.0)):
        tell(bench, RACK, b"SOURCE1:CURRENT %.4fE-3\n" % milliamps, at_s=SETTLED_S + 10.0 * number)
        found.append(power_w(bench, at_s=SETTLED_S + 10.0 * number + 5.0))
        part = max(milliamps - 17.0, 0.0) / (34.0 - 17.0)
        expected.append(expected_w(recipe, bench, source_w=part * bench.truth()["source.power"]))

    assert found == pytest.approx(expected, rel=1e-6)


def test_a_warmer_diode_emits_by_its_higher_threshold(recipe: Recipe, drivers: Mapping[str, Driver]) -> None:
    quiet = f"{QUIET}, source 1: {{threshold: 17 mA, characteristic temperature: 128 K}}"
    bench = FACTORY.build(recipe, make_rig(drivers, quiet), 3)
    switch_on(bench)

    tell(bench, RACK, b"SOURCE2:TEMPERATURE:SPOINT 34\n", at_s=SETTLED_S)

    part = (34.0 - 17.0 * math.exp(10.0 / 128.0)) / 17.0
    expected = expected_w(recipe, bench, source_w=part * bench.truth()["source.power"])
    assert power_w(bench, at_s=2 * SETTLED_S) == pytest.approx(expected, rel=1e-6)


def test_a_diode_that_nobody_cools_is_as_warm_as_the_room(recipe: Recipe, drivers: Mapping[str, Driver]) -> None:
    quiet = f"{QUIET}, source 1: {{threshold: 17 mA, characteristic temperature: 128 K}}"
    bench = FACTORY.build(recipe, make_rig(drivers, quiet), 3)

    tell(bench, RACK, ON, at_s=0.0)

    part = (34.0 - 17.0 * math.exp((21.0 - 24.0) / 128.0)) / 17.0
    expected = expected_w(recipe, bench, source_w=part * bench.truth()["source.power"])
    assert power_w(bench, at_s=SETTLED_S) == pytest.approx(expected, rel=1e-6)


def test_without_anything_that_cools_it_the_diode_is_prepared_at_the_temperature_of_the_room(
    recipe: Recipe, drivers: Mapping[str, Driver]
) -> None:
    bench = FACTORY.build(recipe, make_rig(drivers, without="  diode tec:"), 3)

    tell(bench, RACK, ON, at_s=0.0)

    assert power_w(bench, at_s=SETTLED_S) == pytest.approx(expected_w(recipe, bench), rel=1e-6)


@pytest.mark.parametrize("celsius", [22.0, 28.0])
def test_the_oven_warms_its_element(recipe: Recipe, bench: Bench, celsius: float) -> None:
    switch_on(bench)

    tell(bench, OVEN, b"SOURCE1:TEMPERATURE:SPOINT %.1f;:OUTPUT1 ON\n" % celsius, at_s=1.0)

    found = power_w(bench, at_s=SETTLED_S)
    assert found == pytest.approx(expected_w(recipe, bench, oven_c=celsius), rel=1e-6)
    assert found != pytest.approx(expected_w(recipe, bench), rel=1e-4)


def test_while_the_oven_warms_up_the_light_is_that_of_the_temperature_then(recipe: Recipe, bench: Bench) -> None:
    switch_on(bench)

    tell(bench, OVEN, b"SOURCE1:TEMPERATURE:SPOINT 60;:OUTPUT1 ON\n", at_s=SETTLED_S)

    # at 0.2 K/s, half a minute on; the reading of 100 ms begins there and the head is 10 ms late
    expected = expected_w(recipe, bench, oven_c=21.0 + 0.2 * (30.0 + 0.05 - 0.01))
    assert power_w(bench, at_s=SETTLED_S + 30.0) == pytest.approx(expected, rel=1e-6)


def test_a_slide_takes_its_element_out_and_puts_it_back(recipe: Recipe, bench: Bench) -> None:
    switch_on(bench)

    tell(bench, RACK, b"ROUTE:CLOSE (@4)\n", at_s=1.0)
    out_w = power_w(bench, at_s=SETTLED_S)
    tell(bench, RACK, b"ROUTE:OPEN (@4)\n", at_s=SETTLED_S + 1.0)
    in_w = power_w(bench, at_s=SETTLED_S + 10.0)

    assert out_w == pytest.approx(expected_w(recipe, bench, absent=frozenset({"part"})), rel=1e-6)
    assert in_w == pytest.approx(expected_w(recipe, bench), rel=1e-6)


def test_a_mount_flips_its_element_out(recipe: Recipe, bench: Bench) -> None:
    switch_on(bench)

    tell(bench, FLIP, b"G90 G0 A-90.000\n", at_s=1.0)  # its dial counts clockwise

    assert power_w(bench, at_s=SETTLED_S) == pytest.approx(
        expected_w(recipe, bench, absent=frozenset({"plate"})), rel=1e-6
    )


def test_somebody_takes_an_element_out_by_hand(recipe: Recipe, bench: Bench) -> None:
    switch_on(bench)

    bench.take_out_by_hand("part", True, 1.0)
    out_w = power_w(bench, at_s=SETTLED_S)
    bench.take_out_by_hand("part", False, SETTLED_S + 1.0)

    assert out_w == pytest.approx(expected_w(recipe, bench, absent=frozenset({"part"})), rel=1e-6)
    assert power_w(bench, at_s=SETTLED_S + 10.0) == pytest.approx(expected_w(recipe, bench), rel=1e-6)


def test_a_cap_on_the_detectors_leaves_nothing_at_all(recipe: Recipe, bench: Bench) -> None:
    switch_on(bench)

    bench.cap_by_hand(True, 1.0)
    capped = [power_w(bench, address, at_s=SETTLED_S) for address in (SIGNAL, MONITOR)]
    bench.cap_by_hand(False, SETTLED_S + 1.0)

    assert capped == pytest.approx([0.0, 0.0], abs=1e-15)
    assert power_w(bench, at_s=SETTLED_S + 10.0) == pytest.approx(expected_w(recipe, bench), rel=1e-6)


def test_the_shutter_of_the_rack_closes_the_beam(bench: Bench) -> None:
    switch_on(bench)

    tell(bench, RACK, b"ROUTE:CLOSE (@3)\n", at_s=1.0)

    assert power_w(bench, at_s=SETTLED_S) == pytest.approx(bench.truth()["signal.stray light"], rel=1e-6)


def test_channels_of_one_rack_share_a_twin_that_says_what_it_is(bench: Bench) -> None:
    wire = Wire(bench.twin(RACK))

    assert wire.ask(b"*IDN?") == (
        f"polrig,simulated current source and temperature controller and switch,source 1,{__version__}"
    )
    assert wire.ask(b"OUTPUT1?;:OUTPUT2?;:ROUTE:CLOSE? (@3,4)") == "0;0;0,0"


def test_an_interlock_opens_when_the_rig_file_says(recipe: Recipe, drivers: Mapping[str, Driver]) -> None:
    bench = FACTORY.build(recipe, make_rig(drivers, f"{QUIET}, source 1: {{interlock opens after: 500 s}}"), 3)
    switch_on(bench)

    before_w, after_w = power_w(bench, at_s=490.0), power_w(bench, at_s=510.0)

    assert before_w == pytest.approx(expected_w(recipe, bench), rel=1e-5)
    assert after_w == pytest.approx(bench.truth()["signal.stray light"], rel=1e-6)


def test_a_sensor_breaks_when_the_rig_file_says(recipe: Recipe, drivers: Mapping[str, Driver]) -> None:
    bench = FACTORY.build(recipe, make_rig(drivers, f"{QUIET}, oven 1: {{sensor breaks after: 500 s}}"), 3)
    tell(bench, OVEN, b"SOURCE1:TEMPERATURE:SPOINT 40;:OUTPUT1 ON\n", at_s=1.0)

    shown = [Wire(bench.twin(OVEN), now_s=at_s).ask(b"MEASURE1:TEMPERATURE?") for at_s in (490.0, 510.0)]

    assert float(shown[0]) == pytest.approx(40.0, abs=0.01)
    assert shown[1] == "9.910000E+37"


def test_a_sensor_that_is_not_the_stated_one_leads_elsewhere(recipe: Recipe, drivers: Mapping[str, Driver]) -> None:
    """12 kOhm is 20.98 degC by one published beta and 20.36 degC by another."""
    wrong = f'{QUIET}, tec 1: {{sensor: "beta 3435 K, 10 kOhm at 25 degC"}}'
    benches = [FACTORY.build(recipe, make_rig(drivers, text), 3) for text in (QUIET, wrong)]
    at_20 = AT_24.replace(b"24", b"20.98")
    resistances = []

    for bench in benches:
        tell(bench, RACK, at_20, at_s=0.0)
        resistances.append(float(Wire(bench.twin(RACK), now_s=SETTLED_S).ask(b"MEASURE2:RESISTANCE?")))

    assert resistances == pytest.approx([12000.0, 12000.0], rel=1e-3)


def test_two_heads_that_read_at_once_see_the_same_noise_of_the_source(
    recipe: Recipe, drivers: Mapping[str, Driver]
) -> None:
    bench = FACTORY.build(recipe, make_rig(drivers, f"{QUIET}, source noise: 0.5 %"), 3)
    switch_on(bench)
    count = 400

    pairs = [[power_w(bench, at, at_s=SETTLED_S + n) for at in (SIGNAL, MONITOR)] for n in range(count)]

    truth = bench.truth()
    signal, monitor = (
        [level - truth[f"{role}.stray light"] for level in levels]
        for role, levels in zip(("signal", "monitor"), zip(*pairs, strict=True), strict=True)
    )
    ratios = [one / other for one, other in zip(signal, monitor, strict=True)]
    spread = statistics.stdev(signal) / statistics.fmean(signal)
    # five standard errors, and the 1.3 % by which readings that begin within a cell fall short at most
    assert spread == pytest.approx(0.005, rel=5 / math.sqrt(2 * count) + 0.013)
    # seven digits of each reading are all that is left
    assert max(ratios) / min(ratios) - 1.0 < 1e-5


def test_what_the_source_leaves_of_the_declared_noise_is_the_heads_own(
    recipe: Recipe, drivers: Mapping[str, Driver]
) -> None:
    """3-4-5: of 0.05 % declared, 0.04 % is the source's and 0.03 % each head's own."""
    simulated = "drift: 0 1/h, source noise: 0.04 %, head 1: {noise: 0 pW}, head 2: {noise: 0 pW}"
    bench = FACTORY.build(recipe, make_rig(drivers, simulated), 3)
    switch_on(bench)
    count = 1500

    pairs = [[power_w(bench, at, at_s=SETTLED_S + n) for at in (SIGNAL, MONITOR)] for n in range(count)]

    means = [statistics.fmean(levels) for levels in zip(*pairs, strict=True)]
    signal, monitor = ([p[at] / means[at] for p in pairs] for at in (0, 1))
    bound = 5 / math.sqrt(2 * count) + 0.013
    assert statistics.stdev(signal) == pytest.approx(5e-4, rel=bound)
    ratio = [one / other for one, other in zip(signal, monitor, strict=True)]
    assert statistics.stdev(ratio) == pytest.approx(math.sqrt(2) * 3e-4, rel=bound)


def test_an_unfilled_monitor_takes_its_light_all_the_same(recipe: Recipe, drivers: Mapping[str, Driver]) -> None:
    full = FACTORY.build(recipe, make_rig(drivers), 3)
    bare = FACTORY.build(recipe, make_rig(drivers, without="  monitor:"), 3)
    for bench in (full, bare):
        switch_on(bench)

    readings = [power_w(bench, at_s=SETTLED_S) for bench in (full, bare)]

    assert readings[0] == readings[1]
    assert "monitor.stray light" not in bare.truth()
    assert abs(power_w(bare, MONITOR, at_s=SETTLED_S + 10.0)) < 1e-15


def test_the_truth_of_a_pick_off_keeps_to_its_tolerance(recipe: Recipe, drivers: Mapping[str, Driver]) -> None:
    rig = make_rig(drivers)

    fractions = [FACTORY.build(recipe, rig, seed).truth()["pick-off.fraction"] for seed in range(100)]

    # five standard errors each
    assert statistics.fmean(fractions) == pytest.approx(0.04, abs=5 * 0.002 / 10)
    assert statistics.stdev(fractions) == pytest.approx(0.002, rel=5 / math.sqrt(200))


@pytest.mark.parametrize(
    ("more", "words"),
    [
        (f"  tec 2: {{driver: scpi-temperature-controller, at: {RACK}, channel: 1}}", "only one channel 1"),
        (f"  relay 1: {{driver: scpi-relay, at: {RACK}, channel: 4}}", "only one channel 4"),
        (f"  head 3: {{driver: scpi-power-meter, at: {RACK}}}", "nothing that is"),
    ],
)
def test_what_cannot_be_one_instrument_is_refused(
    recipe: Recipe, drivers: Mapping[str, Driver], more: str, words: str
) -> None:
    with pytest.raises(PlanError, match=words) as caught:
        FACTORY.build(recipe, make_rig(drivers, more=more), 3)

    assert "of its own" in str(caught.value)


def test_a_relay_is_a_contact_that_moves_nothing(recipe: Recipe, drivers: Mapping[str, Driver]) -> None:
    more = f"  relay 1: {{driver: scpi-relay, at: {RACK}, channel: 9}}"
    bench = FACTORY.build(recipe, make_rig(drivers, more=more), 3)
    switch_on(bench)

    tell(bench, RACK, b"ROUTE:CLOSE (@9)\n", at_s=1.0)

    assert Wire(bench.twin(RACK), now_s=2.0).ask(b"ROUTE:CLOSE? (@3,4,9)") == "0,0,1"
    assert power_w(bench, at_s=SETTLED_S) == pytest.approx(expected_w(recipe, bench), rel=1e-6)


def test_a_threshold_above_the_prepared_current_is_refused(recipe: Recipe, drivers: Mapping[str, Driver]) -> None:
    rig = make_rig(drivers, "source 1: {threshold: 35 mA}")

    with pytest.raises(PlanError, match="threshold at 35 mA, but is used at 34 mA"):
        FACTORY.build(recipe, rig, 3)


def test_the_same_seed_gives_the_same_bench(recipe: Recipe, drivers: Mapping[str, Driver]) -> None:
    def traffic(seed: int) -> list[str]:
        bench = FACTORY.build(recipe, make_rig(drivers, "source noise: 0.1 %"), seed)
        switch_on(bench)
        asked = ((SIGNAL, b"READ?"), (MONITOR, b"READ?"), (RACK, b"MEASURE2:TEMPERATURE?"), (OVEN, b"MEAS:RES?"))
        return [Wire(bench.twin(address), now_s=SETTLED_S).ask(message) for address, message in asked]

    first, second, other = traffic(7), traffic(7), traffic(8)

    assert first == second
    assert all(one != another for one, another in zip(first, other, strict=True))
