"""The simulated temperature controller: it knows a temperature only through a resistance."""

import itertools
import math
import statistics

import pytest
from twin_wire import Wire, torn, whole

from rigctl.thermistor import Beta, SteinhartHart, Thermistor
from rigctl_sim.noise import normals
from rigctl_sim.plant import Plant, PlantMake
from rigctl_sim.scpi.twin import ScpiTwin
from rigctl_sim.temperature_controller import FIRST_CURVE, ControllerMake, SimulatedTemperatureController

AMBIENT_C = 22.0
OTHER = Beta(1e4, 25.0, 3435.0)
"""Of the same 10 kOhm at 25 degC, and half a kelvin away five kelvin below."""
SETPOINT, ON, OFF = b"SOURCE1:TEMPERATURE:SPOINT", b"OUTPUT1:STATE ON", b"OUTPUT1:STATE OFF"
LOW, HIGH = b"SOURCE1:TEMPERATURE:LIMIT:LOW", b"SOURCE1:TEMPERATURE:LIMIT:HIGH"
CURVE, BETA = b"SENSE1:TEMPERATURE:THERMISTOR:SHHART", b"SENSE1:TEMPERATURE:THERMISTOR:BETA"
TEMPERATURE, RESISTANCE = b"MEASURE1:TEMPERATURE?", b"MEASURE1:RESISTANCE?"
QUESTIONABLE = b"STATUS:QUESTIONABLE:CONDITION?"


def make_plant(*, fails_at_s: float = math.inf) -> Plant:
    return Plant(
        PlantMake(AMBIENT_C, time_constant_s=4.0, slew_k_per_s=0.2, idle_time_constant_s=60.0), fails_at_s=fails_at_s
    )


def make_wire(
    plant: Plant,
    *,
    sensor: Thermistor = FIRST_CURVE,
    noise_k: float = 0.0,
    breaks_at_s: float = math.inf,
    channel: int = 1,
    span_c: tuple[float, float] = (-10.0, 80.0),
) -> Wire:
    make = ControllerMake(span_c, resolution_k=1e-3, sensor=sensor, noise_k=noise_k, sensor_breaks_at_s=breaks_at_s)
    controller = SimulatedTemperatureController(make, plant, normals(3, "tec 1"), channel=channel)
    return Wire(ScpiTwin(controller, identity="polrig,simulated temperature controller,tec 1,0"))


@pytest.fixture
def plant() -> Plant:
    return make_plant()


@pytest.fixture
def wire(plant: Plant) -> Wire:
    return make_wire(plant)


def complaint(wire: Wire, message: bytes) -> int:
    wire.send(message + b"\n")
    return int(wire.ask(b"SYST:ERR?").partition(",")[0])


def number(wire: Wire, query: bytes, *, at_s: float) -> float:
    return float(wire.ask(query, at_s=at_s))


def test_after_power_on_it_regulates_nothing(wire: Wire, plant: Plant) -> None:
    assert wire.ask(b"OUTPUT1:STATE?;:" + QUESTIONABLE) == "0;0"
    assert plant(1e6) == AMBIENT_C


def test_it_measures_the_plant_though_it_regulates_nothing(wire: Wire) -> None:
    assert number(wire, TEMPERATURE, at_s=1.0) == pytest.approx(AMBIENT_C, abs=1e-5)


def test_switched_on_it_goes_for_its_setpoint(wire: Wire, plant: Plant) -> None:
    wire.send(SETPOINT + b" 30;:" + ON + b"\n", at_s=1.0)

    assert plant(1.0 + 10.0) == pytest.approx(AMBIENT_C + 2.0, rel=1e-9)
    assert plant(1e4) == pytest.approx(30.0, abs=1e-9)
    assert number(wire, TEMPERATURE, at_s=1e4) == pytest.approx(30.0, abs=1e-5)


def test_a_setpoint_alone_moves_nothing(wire: Wire, plant: Plant) -> None:
    wire.send(SETPOINT + b" 30\n", at_s=1.0)

    assert plant(1e4) == AMBIENT_C


def test_another_setpoint_is_gone_for_at_once(wire: Wire, plant: Plant) -> None:
    wire.send(SETPOINT + b" 30;:" + ON + b"\n", at_s=1.0)
    wire.send(SETPOINT + b" 15\n", at_s=500.0)

    assert plant(1e4) == pytest.approx(15.0, abs=1e-9)


def test_switched_off_the_plant_drifts_to_ambient(wire: Wire, plant: Plant) -> None:
    wire.send(SETPOINT + b" 30;:" + ON + b"\n", at_s=1.0)

    wire.send(OFF + b"\n", at_s=500.0)

    assert plant(500.0 + 60.0) - AMBIENT_C == pytest.approx(8.0 / math.e, rel=1e-6)


def test_switching_off_again_starts_no_second_drift(wire: Wire, plant: Plant) -> None:
    wire.send(SETPOINT + b" 30;:" + ON + b"\n", at_s=1.0)
    wire.send(OFF + b"\n", at_s=500.0)
    expected_c = plant(700.0)

    wire.send(OFF + b"\n", at_s=600.0)

    assert plant(700.0) == expected_c


@pytest.mark.parametrize(("argument", "answer"), [(b"24", "2.400000E+01"), (b"24.00049 CEL", "2.400000E+01")])
def test_a_setpoint_is_rounded_to_a_step_and_reads_back(wire: Wire, argument: bytes, answer: str) -> None:
    assert wire.ask(SETPOINT + b" " + argument + b";:" + SETPOINT + b"?;:SYST:ERR?") == f'{answer};0,"No error"'


@pytest.mark.parametrize("short", [b"TEMP:SPO", b"SOUR1:TEMP:SPO", b"source:temperature:spoint"])
def test_headers_may_be_short(wire: Wire, short: bytes) -> None:
    assert wire.ask(short + b" 24;:" + SETPOINT + b"?") == "2.400000E+01"


@pytest.mark.parametrize("celsius", [b"-10.1", b"80.5"])
def test_a_setpoint_that_the_plant_cannot_reach_is_refused(wire: Wire, celsius: bytes) -> None:
    assert complaint(wire, SETPOINT + b" " + celsius) == -222


@pytest.mark.parametrize("celsius", [b"-10", b"80"])
def test_the_ends_of_the_span_are_setpoints(wire: Wire, celsius: bytes) -> None:
    assert complaint(wire, SETPOINT + b" " + celsius) == 0


def test_limits_read_back(wire: Wire) -> None:
    assert wire.ask(LOW + b" 10;:" + LOW + b"?;:" + HIGH + b" 40;:" + HIGH + b"?") == "1.000000E+01;4.000000E+01"


def test_a_setpoint_beyond_the_limits_is_refused(wire: Wire) -> None:
    wire.send(LOW + b" 10;:" + HIGH + b" 40\n")

    assert complaint(wire, SETPOINT + b" 41") == -222
    assert complaint(wire, SETPOINT + b" 9") == -222
    assert wire.ask(SETPOINT + b"?") == "2.500000E+01"


@pytest.mark.parametrize("message", [LOW + b" 50", HIGH + b" 5"])
def test_limits_that_cross_are_a_conflict(wire: Wire, message: bytes) -> None:
    wire.send(LOW + b" 10;:" + HIGH + b" 40\n")

    assert complaint(wire, message) == -221


@pytest.mark.parametrize(("message", "celsius"), [(LOW + b" 35", 35.0), (HIGH + b" 15", 15.0)])
def test_a_limit_takes_the_setpoint_with_it(wire: Wire, plant: Plant, message: bytes, celsius: float) -> None:
    wire.send(ON + b"\n", at_s=1.0)

    wire.send(message + b"\n", at_s=2.0)

    assert number(wire, SETPOINT + b"?", at_s=3.0) == celsius
    assert plant(1e4) == pytest.approx(celsius, abs=1e-9)


def test_a_temperature_outside_the_limits_is_told_while_it_regulates(wire: Wire) -> None:
    wire.send(LOW + b" 30;:" + SETPOINT + b" 40\n", at_s=1.0)
    assert wire.ask(QUESTIONABLE, at_s=2.0) == "0"

    wire.send(ON + b"\n", at_s=3.0)

    assert wire.ask(QUESTIONABLE, at_s=4.0) == "16"
    assert wire.ask(QUESTIONABLE, at_s=1e4) == "0"


def test_resistance_and_temperature_belong_together(wire: Wire) -> None:
    resistance, temperature = wire.ask(RESISTANCE + b";:" + TEMPERATURE, at_s=1.0).split(";")

    assert FIRST_CURVE.temperature_c(float(resistance)) == pytest.approx(float(temperature), abs=1e-4)


def test_the_published_curve_is_what_it_takes_its_sensor_for(wire: Wire) -> None:
    """Three public documents of this curve give 12,490 ohm at 20 degC; its coefficients 12,493."""
    wire.send(SETPOINT + b" 20;:" + ON + b"\n", at_s=1.0)

    assert number(wire, RESISTANCE, at_s=1e4) == pytest.approx(12493.17, abs=0.02)


@pytest.mark.parametrize(
    ("header", "constants", "answer"),
    [
        (CURVE, b"1.12749179E-3,2.34379284E-4,8.67915264E-8", "1.127491790E-03,2.343792840E-04,8.679152640E-08"),
        (BETA, b"1E4,25,3976.8", "1.000000000E+04,2.500000000E+01,3.976800000E+03"),
    ],
)
def test_constants_read_back(wire: Wire, header: bytes, constants: bytes, answer: str) -> None:
    assert wire.ask(header + b" " + constants + b";:" + header + b"?;:SYST:ERR?") == f'{answer};0,"No error"'


def test_told_the_true_constants_it_regulates_to_the_true_temperature(plant: Plant) -> None:
    wire = make_wire(plant, sensor=OTHER)

    wire.send(BETA + b" 1E4,25,3435;:" + SETPOINT + b" 20;:" + ON + b"\n", at_s=1.0)

    assert plant(1e4) == pytest.approx(20.0, abs=1e-9)


def test_told_the_constants_of_another_sensor_it_shows_the_setpoint_and_is_elsewhere(plant: Plant) -> None:
    """12 kOhm is 20.894 degC on the one curve and 20.36 degC on the other."""
    wire = make_wire(plant, sensor=OTHER)

    wire.send(SETPOINT + b" 20.894;:" + ON + b"\n", at_s=1.0)

    assert number(wire, TEMPERATURE, at_s=1e4) == pytest.approx(20.894, abs=1e-4)
    assert plant(1e4) == pytest.approx(20.36, abs=0.005)


def test_constants_that_change_while_it_regulates_change_where_it_goes(plant: Plant) -> None:
    wire = make_wire(plant, sensor=OTHER)
    wire.send(SETPOINT + b" 20.894;:" + ON + b"\n", at_s=1.0)

    wire.send(BETA + b" 1E4,25,3435\n", at_s=500.0)

    assert plant(1e4) == pytest.approx(20.894, abs=1e-9)


@pytest.mark.parametrize("constants", [b"-1,1E-9,0", b"1E-3,1E-9,0"])
def test_constants_that_lead_nowhere_are_refused(wire: Wire, constants: bytes) -> None:
    assert complaint(wire, CURVE + b" " + constants) == -222
    assert wire.ask(CURVE + b"?").startswith("1.129240000E-03,")


@pytest.mark.parametrize(("constants", "end_c"), [(b"1E5,25,3976", -10.0), (b"1E3,25,3976", 80.0)])
def test_constants_of_a_wrong_power_of_ten_drive_the_plant_to_the_end_of_its_reach(
    wire: Wire, plant: Plant, constants: bytes, end_c: float
) -> None:
    wire.send(BETA + b" " + constants + b";:" + ON + b"\n", at_s=1.0)

    assert plant(1e4) == end_c


@pytest.mark.parametrize(("message", "code"), [(CURVE + b" 1E-3,2E-4", -109), (BETA + b" 1,2,3,4", -108)])
def test_three_constants_belong_together(wire: Wire, message: bytes, code: int) -> None:
    assert complaint(wire, message) == code


def test_its_noise_is_as_large_as_stated() -> None:
    wire, count = make_wire(make_plant(), noise_k=2e-3), 2000

    shown = [number(wire, TEMPERATURE, at_s=float(instant)) for instant in range(1, count + 1)]

    # five standard errors each
    assert statistics.fmean(shown) == pytest.approx(AMBIENT_C, abs=5 * 2e-3 / math.sqrt(count))
    assert statistics.stdev(shown) == pytest.approx(2e-3, rel=5 / math.sqrt(2 * count))


def test_questions_at_one_instant_share_a_measurement() -> None:
    wire = make_wire(make_plant(), noise_k=0.1)

    temperature, resistance, again = wire.ask(b";:".join((TEMPERATURE, RESISTANCE, TEMPERATURE)), at_s=1.0).split(";")

    assert temperature == again
    assert FIRST_CURVE.temperature_c(float(resistance)) == pytest.approx(float(temperature), abs=1e-4)


def test_noise_of_the_sensor_does_not_move_the_plant(plant: Plant) -> None:
    wire = make_wire(plant, noise_k=1.0)

    wire.send(SETPOINT + b" 30;:" + ON + b"\n", at_s=1.0)

    assert plant(1e4) == pytest.approx(30.0, abs=1e-9)


def test_a_broken_sensor_is_open_and_no_temperature() -> None:
    wire = make_wire(make_plant(fails_at_s=100.0), breaks_at_s=100.0)
    wire.send(SETPOINT + b" 30;:" + ON + b"\n", at_s=1.0)

    answers = wire.ask(b";:".join((TEMPERATURE, RESISTANCE, b"OUTPUT1:STATE?", QUESTIONABLE)), at_s=101.0)

    assert answers == "9.910000E+37;9.900000E+37;0;16"


def test_with_a_broken_sensor_nothing_is_regulated() -> None:
    plant = make_plant(fails_at_s=100.0)
    wire = make_wire(plant, breaks_at_s=100.0)
    wire.send(SETPOINT + b" 30;:" + ON + b"\n", at_s=1.0)

    wire.now_s = 200.0
    assert complaint(wire, ON) == -221
    assert plant(1e6) == AMBIENT_C


def test_a_reset_stops_regulating_and_forgets_every_setting(wire: Wire, plant: Plant) -> None:
    wire.send(LOW + b" 10;:" + BETA + b" 2E4,25,3435;:" + SETPOINT + b" 30;:" + ON + b"\n", at_s=1.0)

    wire.send(b"*RST\n", at_s=2.0)

    found = wire.ask(b";:".join((SETPOINT + b"?", LOW + b"?", HIGH + b"?", b"OUTPUT1:STATE?", TEMPERATURE)), at_s=1e4)
    assert found.split(";")[:4] == ["2.500000E+01", "-1.000000E+01", "8.000000E+01", "0"]
    assert float(found.split(";")[4]) == pytest.approx(AMBIENT_C, abs=1e-5)


def test_the_first_setpoint_lies_within_what_the_plant_can_reach() -> None:
    wire = make_wire(make_plant(), span_c=(30.0, 90.0))

    assert wire.ask(SETPOINT + b"?") == "3.000000E+01"


def test_another_channel_has_its_own_number() -> None:
    wire = make_wire(make_plant(), channel=2)

    assert wire.ask(b"SOURCE2:TEMPERATURE:SPOINT 24;:SOURCE2:TEMPERATURE:SPOINT?;:OUTPUT2:STATE?") == "2.400000E+01;0"
    assert complaint(wire, SETPOINT + b" 24") == -114


@pytest.mark.parametrize(
    "data",
    [
        SETPOINT + b" 24;:" + ON + b";:" + TEMPERATURE + b"\n" + RESISTANCE + b"\n",
        BETA + b" 1E4,25\n" + b"SYST:ERR?;:" + BETA + b"?\r\n*IDN?\n",
    ],
)
def test_torn_bytes_give_the_same_answers_as_whole_ones(data: bytes) -> None:
    twins = [make_wire(make_plant(), noise_k=1e-3).twin for _ in range(2)]

    assert whole(twins[0], data, at_s=1.0) == torn(twins[1], data, at_s=1.0)


@pytest.mark.parametrize("sensor", [FIRST_CURVE, OTHER, SteinhartHart(1.12749179e-3, 2.34379284e-4, 8.67915264e-8)])
def test_every_setpoint_is_shown_once_it_is_reached(sensor: Thermistor) -> None:
    for setpoint, taken_for in itertools.product((5.0, 25.0, 60.0), (CURVE, BETA)):
        wire = make_wire(make_plant(), sensor=sensor)
        told = b" 1.1E-3,2.3E-4,9E-8" if taken_for == CURVE else b" 1.1E4,25,3900"
        wire.send(taken_for + told + b";:" + SETPOINT + b" %.1f;:" % setpoint + ON + b"\n", at_s=1.0)

        assert number(wire, TEMPERATURE, at_s=1e5) == pytest.approx(setpoint, abs=1e-4)
