"""Several devices behind one wire: each hears its own channel, all share one status."""

import pytest
from twin_wire import Wire

from rigctl_sim.current_source import SimulatedCurrentSource, SourceMake
from rigctl_sim.diode import Load
from rigctl_sim.noise import normals
from rigctl_sim.plant import Plant, PlantMake
from rigctl_sim.scpi.rack import Rack
from rigctl_sim.scpi.status import Status
from rigctl_sim.scpi.twin import ScpiTwin
from rigctl_sim.switch import Mover, SimulatedSwitch
from rigctl_sim.temperature_controller import FIRST_CURVE, ControllerMake, SimulatedTemperatureController
from rigctl_sim.trajectory import Trajectory

QUESTIONABLE = b"STATUS:QUESTIONABLE:CONDITION?"


class Bench:
    """A source on channel 1, one on 4, a controller on 2, and relay 3 with a shutter."""

    def __init__(self) -> None:
        status = Status()
        self.currents = {channel: Trajectory(0.0) for channel in (1, 4)}
        self.plant = Plant(PlantMake(22.0, time_constant_s=4.0, slew_k_per_s=0.2, idle_time_constant_s=60.0))
        self.shutter = Mover(Trajectory(0.0), False, 0.02)
        sources = [
            SimulatedCurrentSource(SourceMake(0.2, 5.0, 1e-5), Load(1.5, 5.0), current, channel=channel, status=status)
            for channel, current in self.currents.items()
        ]
        make = ControllerMake((5.0, 80.0), 1e-3, FIRST_CURVE, 0.0)
        controller = SimulatedTemperatureController(make, self.plant, normals(1, "tec"), channel=2, status=status)
        switch = SimulatedSwitch(8, {3: self.shutter}, status=status)
        rack = Rack([*sources, controller, switch], status)
        self.wire = Wire(ScpiTwin(rack, identity="polrig,simulated rack,rack 1,0"))


@pytest.fixture
def bench() -> Bench:
    return Bench()


def test_each_channel_is_heard_by_its_own_device(bench: Bench) -> None:
    bench.wire.send(
        b"SOURCE1:CURRENT 0.01;:OUTPUT1 ON;:SOURCE4:CURRENT 0.04;:OUTPUT4 ON;:"
        b"SOURCE2:TEMPERATURE:SPOINT 30;:OUTPUT2 ON;:ROUTE:CLOSE (@3)\n",
        at_s=1.0,
    )

    assert [current(1e4) for current in bench.currents.values()] == pytest.approx([0.01, 0.04])
    assert bench.plant(1e4) == pytest.approx(30.0)
    assert bench.shutter.place(1e4) == 1.0


def test_one_output_leaves_the_others_alone(bench: Bench) -> None:
    bench.wire.send(b"OUTPUT4:STATE ON\n", at_s=1.0)

    assert bench.wire.ask(b"OUTPUT1:STATE?;:OUTPUT2:STATE?;:OUTPUT4:STATE?") == "0;0;1"


def test_one_message_may_ask_all_of_them(bench: Bench) -> None:
    answer = bench.wire.ask(b"MEASURE1:CURRENT?;:MEASURE2:TEMPERATURE?;:ROUTE:CLOSE? (@3);:SYST:ERR?")

    assert answer == '0.000000E+00;2.200000E+01;0;0,"No error"'


def test_a_path_goes_on_with_its_channel(bench: Bench) -> None:
    """SCPI-1999 volume 1, 6.2.4: a header without a leading colon continues the path of the one before it."""
    answer = bench.wire.ask(b"SOURCE4:CURRENT:LIMIT 0.05;LIMIT?;:SOURCE1:CURRENT:LIMIT?")

    assert answer == "5.000000E-02;2.000000E-01"


@pytest.mark.parametrize(
    ("message", "code"),
    [
        (b"SOURCE2:CURRENT 0.01", -114),
        (b"SOURCE1:TEMPERATURE:SPOINT 30", -114),
        (b"OUTPUT3:STATE ON", -114),
        (b"SYSTEM2:ERROR?", -113),
        (b"SOURCE2:TEMPERATURE2:SPOINT 30", -113),
    ],
)
def test_a_channel_that_has_no_such_command_is_out_of_range(bench: Bench, message: bytes, code: int) -> None:
    bench.wire.send(message + b"\n")

    assert bench.wire.ask(b"SYST:ERR?").startswith(f"{code},")


def test_a_number_left_out_is_one(bench: Bench) -> None:
    bench.wire.send(b"CURRENT 0.01;:OUTPUT ON\n", at_s=1.0)

    assert bench.wire.ask(b"SOURCE1:CURRENT?;:OUTPUT1?") == "1.000000E-02;1"


def test_they_share_one_queue_of_errors(bench: Bench) -> None:
    bench.wire.send(b"SOURCE1:CURRENT 9\nSOURCE2:TEMPERATURE:SPOINT 999\nROUTE:CLOSE (@99)\n")

    assert bench.wire.ask(b"SYST:ERR:COUN?") == "3"


def test_a_bit_of_the_status_stays_until_nobody_sets_it(bench: Bench) -> None:
    trip = b"SOURCE%d:VOLTAGE:PROTECTION 1;:SOURCE%d:CURRENT 0.01;:OUTPUT%d ON\n"
    for channel in (1, 4):
        bench.wire.send(trip % (channel, channel, channel), at_s=1.0)

    told = [bench.wire.ask(QUESTIONABLE)]
    for channel in (1, 4):
        told.append(bench.wire.ask(b"OUTPUT%d:PROTECTION:CLEAR;:" % channel + QUESTIONABLE))

    assert told == ["1", "1", "0"]


def test_a_reset_resets_all_of_them(bench: Bench) -> None:
    bench.wire.send(b"OUTPUT1 ON;OUTPUT2 ON;:ROUTE:CLOSE (@3)\n", at_s=1.0)

    assert bench.wire.ask(b"*RST;:OUTPUT1?;OUTPUT2?;:ROUTE:CLOSE? (@3)", at_s=2.0) == "0;0;0"


def test_nothing_of_it_takes_time(bench: Bench) -> None:
    bench.wire.send(b"OUTPUT2 ON;*OPC?\n", at_s=1.0)

    assert bench.wire.gather(until_s=1.01) == b"1\n"
