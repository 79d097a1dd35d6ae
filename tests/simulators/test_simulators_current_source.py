"""The simulated current source: limits, compliance, interlock, and what flows when."""

import math

import pytest
from twin_wire import Wire, torn, whole

from rigctl_sim.current_source import REACHED_IN_S, SimulatedCurrentSource, SourceMake
from rigctl_sim.diode import Load
from rigctl_sim.scpi.twin import ScpiTwin
from rigctl_sim.trajectory import Trajectory

LOAD = Load(turn_on_v=1.5, series_ohm=5.0)
MAKE = SourceMake(current_a=0.2, compliance_v=5.0, resolution_a=1e-5)
LEVEL = b"SOURCE1:CURRENT:LEVEL:IMMEDIATE:AMPLITUDE"
LIMIT = b"SOURCE1:CURRENT:LIMIT:AMPLITUDE"
COMPLIANCE = b"SOURCE1:VOLTAGE:PROTECTION:LEVEL"
ON, OFF = b"OUTPUT1:STATE ON", b"OUTPUT1:STATE OFF"
STATE = b"OUTPUT1:STATE?;:OUTPUT1:PROTECTION:TRIPPED?;:STATUS:QUESTIONABLE:CONDITION?"


def make_twin(current: Trajectory, *, channel: int = 1, opens_at_s: float = math.inf) -> ScpiTwin:
    source = SimulatedCurrentSource(MAKE, LOAD, current, channel=channel, interlock_opens_at_s=opens_at_s)
    return ScpiTwin(source, identity="polrig,simulated current source,source 1,0")


@pytest.fixture
def current() -> Trajectory:
    return Trajectory(0.0)


@pytest.fixture
def wire(current: Trajectory) -> Wire:
    return Wire(make_twin(current))


def complaint(wire: Wire, message: bytes) -> int:
    wire.send(message + b"\n")
    return int(wire.ask(b"SYST:ERR?").partition(",")[0])


def set_going(wire: Wire, milliamps: float, *, at_s: float) -> None:
    wire.send(LEVEL + b" %.3fE-3;:%s\n" % (milliamps, ON), at_s=at_s)


def test_after_power_on_nothing_flows(wire: Wire, current: Trajectory) -> None:
    assert wire.ask(LEVEL + b"?;:" + STATE) == "0.000000E+00;0;0;0"
    assert current(1e6) == 0.0


def test_its_limits_are_as_wide_as_they_go_after_power_on(wire: Wire) -> None:
    assert wire.ask(LIMIT + b"?;:" + COMPLIANCE + b"?") == "2.000000E-01;5.000000E+00"


@pytest.mark.parametrize(
    ("header", "argument", "answer"),
    [(LEVEL, b"0.034", "3.400000E-02"), (LIMIT, b"45 MA", "4.500000E-02"), (COMPLIANCE, b"2.5", "2.500000E+00")],
)
def test_what_is_set_reads_back(wire: Wire, header: bytes, argument: bytes, answer: str) -> None:
    assert wire.ask(header + b" " + argument + b";:" + header + b"?;:SYST:ERR?") == f'{answer};0,"No error"'


def test_a_current_is_rounded_to_a_step(wire: Wire) -> None:
    assert wire.ask(LEVEL + b" 0.0340049;:" + LEVEL + b"?") == "3.400000E-02"


@pytest.mark.parametrize("short", [b"CURR", b"SOUR:CURR", b"source1:curr:lev", b"CURR:IMM:AMPL"])
def test_headers_may_be_short(wire: Wire, short: bytes) -> None:
    assert wire.ask(short + b" 0.01;:" + LEVEL + b"?") == "1.000000E-02"


def test_a_setpoint_flows_only_while_the_output_is_on(wire: Wire, current: Trajectory) -> None:
    wire.send(LEVEL + b" 0.034\n", at_s=1.0)
    assert current(2.0) == 0.0

    wire.send(ON + b"\n", at_s=3.0)
    assert current(4.0) == pytest.approx(0.034, rel=1e-12)

    wire.send(OFF + b"\n", at_s=5.0)
    assert current(5.0) == pytest.approx(0.034, rel=1e-12)
    assert current(5.0 + REACHED_IN_S) == 0.0


def test_the_setpoint_outlives_the_output(wire: Wire, current: Trajectory) -> None:
    set_going(wire, 34.0, at_s=1.0)
    wire.send(OFF + b"\n", at_s=2.0)
    wire.send(ON + b"\n", at_s=3.0)

    assert current(4.0) == pytest.approx(0.034, rel=1e-12)


def test_a_current_is_reached_without_overshoot_within_a_millisecond(wire: Wire, current: Trajectory) -> None:
    set_going(wire, 34.0, at_s=1.0)

    way = [current(1.0 + part * REACHED_IN_S) for part in (0.0, 0.25, 0.5, 1.0, 10.0)]

    assert way == pytest.approx([0.0, 0.0085, 0.017, 0.034, 0.034], rel=1e-9)


def test_it_measures_what_flows_and_what_that_needs(wire: Wire) -> None:
    set_going(wire, 34.0, at_s=1.0)
    wire.now_s = 2.0

    measured = wire.ask(b"MEASURE1:CURRENT?;:MEASURE1:VOLTAGE?")

    assert measured == f"3.400000E-02;{LOAD.voltage_at(0.034):.6E}"


def test_switched_off_it_measures_nothing(wire: Wire) -> None:
    wire.send(LEVEL + b" 0.034\n", at_s=1.0)

    assert wire.ask(b"MEAS:CURR?;:MEAS:VOLT?", at_s=2.0) == "0.000000E+00;0.000000E+00"


@pytest.mark.parametrize("message", [LEVEL + b" 0.201", LEVEL + b" -0.001", LIMIT + b" 0.3", COMPLIANCE + b" 6"])
def test_what_it_cannot_do_is_refused(wire: Wire, message: bytes) -> None:
    assert complaint(wire, message) == -222


def test_a_current_beyond_the_limit_is_refused_and_the_old_one_stays(wire: Wire, current: Trajectory) -> None:
    wire.send(LIMIT + b" 0.045\n", at_s=1.0)
    set_going(wire, 34.0, at_s=2.0)

    assert complaint(wire, LEVEL + b" 0.046") == -222
    assert current(10.0) == pytest.approx(0.034, rel=1e-12)


def test_a_current_at_the_limit_is_none_beyond_it(wire: Wire) -> None:
    wire.send(LIMIT + b" 0.045\n", at_s=1.0)

    assert complaint(wire, LEVEL + b" 45.0 MA") == 0


def test_a_limit_that_comes_down_takes_the_current_with_it(wire: Wire, current: Trajectory) -> None:
    set_going(wire, 50.0, at_s=1.0)

    wire.send(LIMIT + b" 0.02\n", at_s=2.0)

    assert current(3.0) == pytest.approx(0.02, rel=1e-12)
    assert wire.ask(LEVEL + b"?;:STATUS:QUESTIONABLE:CONDITION?") == "2.000000E-02;2"


def test_what_asks_for_more_voltage_than_allowed_trips_the_protection(wire: Wire, current: Trajectory) -> None:
    wire.send(COMPLIANCE + b" 1.66\n", at_s=1.0)  # 34 mA need 1.67 V

    set_going(wire, 34.0, at_s=2.0)

    assert wire.ask(STATE) == "0;1;1"
    assert current(10.0) == 0.0


def test_a_compliance_that_comes_down_trips_what_flows(wire: Wire, current: Trajectory) -> None:
    set_going(wire, 34.0, at_s=1.0)

    wire.send(COMPLIANCE + b" 1.6\n", at_s=2.0)

    assert [current(2.0), current(3.0)] == pytest.approx([0.034, 0.0])
    assert wire.ask(STATE, at_s=3.0) == "0;1;1"


def test_a_tripped_output_stays_off_until_the_trip_is_cleared(wire: Wire, current: Trajectory) -> None:
    wire.send(COMPLIANCE + b" 1.66\n", at_s=1.0)
    set_going(wire, 34.0, at_s=2.0)
    assert complaint(wire, ON) == -221

    wire.send(COMPLIANCE + b" 2.5;:OUTPUT1:PROTECTION:CLEAR;:" + ON + b"\n", at_s=3.0)

    assert wire.ask(STATE) == "1;0;0"
    assert current(10.0) == pytest.approx(0.034, rel=1e-12)


def test_an_interlock_that_opens_ends_the_current_at_its_instant(current: Trajectory) -> None:
    wire = Wire(make_twin(current, opens_at_s=5.0))
    set_going(wire, 34.0, at_s=1.0)

    assert current(4.999) == pytest.approx(0.034, rel=1e-12)
    assert current(5.0 + REACHED_IN_S) == 0.0
    assert wire.ask(STATE, at_s=4.0) == "1;0;0"
    assert wire.ask(STATE, at_s=6.0) == "0;0;512"


def test_with_an_open_interlock_the_output_does_not_go_on(current: Trajectory) -> None:
    wire = Wire(make_twin(current, opens_at_s=0.0), now_s=1.0)

    assert complaint(wire, LEVEL + b" 0.03;:" + ON) == -221
    assert current(10.0) == 0.0


@pytest.mark.parametrize("last", [LEVEL + b" 0.02", COMPLIANCE + b" 3", LIMIT + b" 0.1"])
def test_settings_before_the_interlock_opens_do_not_outlive_it(current: Trajectory, last: bytes) -> None:
    wire = Wire(make_twin(current, opens_at_s=5.0))
    set_going(wire, 34.0, at_s=1.0)

    wire.send(last + b"\n", at_s=2.0)

    assert current(4.0) > 0.0
    assert current(6.0) == 0.0


def test_an_output_that_goes_off_before_the_interlock_opens_is_off(current: Trajectory) -> None:
    wire = Wire(make_twin(current, opens_at_s=5.0))
    set_going(wire, 34.0, at_s=1.0)

    wire.send(OFF + b"\n", at_s=2.0)

    assert current(3.0) == 0.0


def test_a_reset_switches_off_and_forgets_every_setting(wire: Wire, current: Trajectory) -> None:
    wire.send(LIMIT + b" 0.1;:" + COMPLIANCE + b" 2\n", at_s=1.0)
    set_going(wire, 34.0, at_s=2.0)

    wire.send(b"*RST\n", at_s=3.0)

    assert wire.ask(LEVEL + b"?;:" + LIMIT + b"?;:" + COMPLIANCE + b"?;:" + STATE) == (
        "0.000000E+00;2.000000E-01;5.000000E+00;0;0;0"
    )
    assert current(4.0) == 0.0


def test_a_reset_clears_a_trip(wire: Wire) -> None:
    wire.send(COMPLIANCE + b" 1.66\n", at_s=1.0)
    set_going(wire, 34.0, at_s=2.0)

    assert wire.ask(b"*RST;:" + STATE) == "0;0;0"


def test_another_channel_has_its_own_number(current: Trajectory) -> None:
    wire = Wire(make_twin(current, channel=3))

    assert wire.ask(b"SOURCE3:CURRENT 0.02;:SOURCE3:CURRENT?;:OUTPUT3:STATE?") == "2.000000E-02;0"
    assert complaint(wire, b"SOURCE1:CURRENT 0.02") == -114
    assert complaint(wire, b"OUTPUT:STATE ON") == -114


@pytest.mark.parametrize(
    "data",
    [
        LEVEL + b" 0.034;:" + ON + b";:" + STATE + b"\nMEAS:VOLT?\n",
        LIMIT + b" 0.02\n" + LEVEL + b" 0.03\nSYST:ERR?\n*IDN?\r\n",
    ],
)
def test_torn_bytes_give_the_same_answers_as_whole_ones(data: bytes) -> None:
    assert whole(make_twin(Trajectory(0.0)), data, at_s=1.0) == torn(make_twin(Trajectory(0.0)), data, at_s=1.0)
