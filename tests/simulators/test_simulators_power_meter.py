"""The simulated power meter on its wire: settings, triggering, ranges, noise and overload."""

import itertools
import math
import statistics
from collections.abc import Iterator

import pytest
from twin_wire import Wire, torn, whole

from rigctl_sim.noise import normals
from rigctl_sim.power_meter import MeterMake, SimulatedPowerMeter
from rigctl_sim.scpi.twin import ANSWERS_IN_S, ScpiTwin

RANGES_W = (2e-5, 2e-4, 2e-3)
NOISE_W = (1e-9, 1e-8, 1e-7)
FETCH = b"FETCH?;:SENSE:POWER:RANGE:UPPER?;:STATUS:QUESTIONABLE:CONDITION?;:SYSTEM:ERROR:NEXT?"


class Ramp:
    """A head whose light grows with time; it notes what it was asked for."""

    def __init__(self, power_w: float = 1e-3, slope_w_per_s: float = 0.0) -> None:
        self.power_w, self.slope_w_per_s = power_w, slope_w_per_s
        self.asked: list[tuple[float, float, float]] = []

    def mean_w(self, begin_s: float, end_s: float, *, time_constant_s: float) -> float:
        self.asked.append((begin_s, end_s, time_constant_s))
        return self.power_w + self.slope_w_per_s * 0.5 * (begin_s + end_s)


def make_twin(
    head: Ramp | None = None,
    *,
    noise: Iterator[float] | None = None,
    relative: float = 0.0,
    saturation: float = 1.0,
) -> ScpiTwin:
    make = MeterMake(
        ranges_w=RANGES_W,
        time_constants_s=(0.3, 0.2, 0.1),
        noise_w=NOISE_W,
        relative_noise=relative,
        saturation_w=saturation,
        apertures_s=(1e-3, 10.0),
    )
    meter = SimulatedPowerMeter(make, head or Ramp(), noise or itertools.repeat(0.0))
    return ScpiTwin(meter, identity="polrig,simulated power meter,head 1,0")


def make_wire(head: Ramp | None = None, *, noise: Iterator[float] | None = None, relative: float = 0.0) -> Wire:
    return Wire(make_twin(head, noise=noise, relative=relative))


@pytest.fixture
def wire() -> Wire:
    return make_wire()


def levels_of(answer: str) -> list[float]:
    return [float(text) for text in answer.split(";")[0].split(",")]


# settings


@pytest.mark.parametrize(
    ("setting", "query", "answer"),
    [
        (b"SENSE:POWER:RANGE:UPPER 0.002", b"SENSE:POWER:RANGE:UPPER?", "2.000000E-03"),
        (b"SENSE:POWER:RANGE:UPPER 1.5 MW", b"SENSE:POWER:RANGE:UPPER?", "2.000000E-03"),
        (b"SENSE:POWER:RANGE:UPPER 0.0001999999", b"SENSE:POWER:RANGE:UPPER?", "2.000000E-04"),
        (b"SENSE:POWER:RANGE:UPPER 0.0002000001", b"SENSE:POWER:RANGE:UPPER?", "2.000000E-04"),
        (b"SENSE:POWER:RANGE:UPPER MIN", b"SENSE:POWER:RANGE:UPPER?", "2.000000E-05"),
        (b"SENSE:POWER:RANGE:AUTO OFF", b"SENSE:POWER:RANGE:AUTO?", "0"),
        (b"SENSE:POWER:RANGE:AUTO ON", b"SENSE:POWER:RANGE:AUTO?", "1"),
        (b"SENSE:POWER:APERTURE 0.1", b"SENSE:POWER:APERTURE?", "1.000000E-01"),
        (b"SENSE:POWER:APERTURE 50 MS", b"SENSE:POWER:APERTURE?", "5.000000E-02"),
        (b"SENSE:CORRECTION:WAVELENGTH 785.2 NM", b"SENSE:CORRECTION:WAVELENGTH?", "7.852000E-07"),
        (b"SENSE:AVERAGE:STATE ON", b"SENSE:AVERAGE:STATE?", "1"),
        (b"SENSE:AVERAGE:COUNT 8", b"SENSE:AVERAGE:COUNT?", "8"),
        (b"TRIGGER:COUNT 4", b"TRIGGER:COUNT?", "4"),
        (b"TRIGGER:SOURCE IMMEDIATE", b"TRIGGER:SOURCE?", "IMM"),
        (b"INITIATE:CONTINUOUS ON", b"INITIATE:CONTINUOUS?", "1"),
        (b"UNIT:POWER W", b"UNIT:POWER?", "W"),
        (b"FORMAT:DATA ASCII", b"FORMAT:DATA?", "ASC"),
    ],
)
def test_a_setting_reads_back_in_the_same_message(wire: Wire, setting: bytes, query: bytes, answer: str) -> None:
    assert wire.ask(setting + b";:" + query + b";:SYSTEM:ERROR:NEXT?") == f'{answer};0,"No error"'


@pytest.mark.parametrize(
    ("setting", "code"),
    [
        (b"SENSE:POWER:RANGE:UPPER 1", -222),
        (b"SENSE:POWER:APERTURE 0", -222),
        (b"SENSE:CORRECTION:WAVELENGTH 785.2", -222),
        (b"SENSE:CORRECTION:WAVELENGTH 785.2 W", -131),
        (b"TRIGGER:COUNT 0", -222),
        (b"TRIGGER:SOURCE EXTERNAL", -224),
        (b"UNIT:POWER DBM", -224),
        (b"FORMAT:DATA REAL", -224),
    ],
)
def test_what_it_cannot_do_is_refused_and_told(wire: Wire, setting: bytes, code: int) -> None:
    wire.send(setting + b"\n")

    assert wire.ask(b"SYST:ERR?").startswith(f"{code},")


def test_the_bounds_of_the_ranges_can_be_asked_for(wire: Wire) -> None:
    assert wire.ask(b"POW:RANG? MIN;:POW:RANG? MAX") == "2.000000E-05;2.000000E-03"


def test_a_reset_brings_back_the_first_settings(wire: Wire) -> None:
    wire.send(b"POW:RANG 1E-5;:TRIG:COUN 7;:POW:APER 1;:INIT:CONT ON\n")

    assert wire.ask(b"*RST;:POW:RANG?;:TRIG:COUN?;:INIT:CONT?") == "2.000000E-03;1;0"
    assert wire.ask(b"POW:RANG:AUTO?;:POW:APER?") == "1;1.000000E-01"


# dwells


def test_a_dwell_comes_back_as_one_block_with_its_range_and_status(wire: Wire) -> None:
    wire.send(b"POW:RANG 0.002;:TRIG:COUN 4;:POW:APER 0.1\n")
    wire.send(b"ABORT;:INITIATE:IMMEDIATE\n")
    assert wire.gather() == b""

    block = ",".join(["1.000000E-03"] * 4)
    assert wire.ask(FETCH, at_s=1.0) == f'{block};2.000000E-03;0;0,"No error"'


def test_each_reading_integrates_its_own_stretch_one_after_the_other() -> None:
    head = Ramp(0.0, 1e-4)
    wire = make_wire(head)
    wire.send(b"POW:RANG 0.002;:TRIG:COUN 3;:POW:APER 0.2;:INIT\n", at_s=5.0)

    levels = levels_of(wire.ask(b"FETC?", at_s=9.0))

    stretches = [5.0, 5.2, 0.1, 5.2, 5.4, 0.1, 5.4, 5.6, 0.1]
    assert list(itertools.chain(*head.asked)) == pytest.approx(stretches)
    assert levels == pytest.approx([5.1e-4, 5.3e-4, 5.5e-4])


def test_averaging_makes_each_reading_so_many_apertures_long() -> None:
    head = Ramp()
    wire = make_wire(head)
    wire.send(b"POW:RANG 0.002;:AVER:COUN 5;:AVER ON;:POW:APER 0.1;:INIT\n", at_s=0.0)

    wire.ask(b"FETC?", at_s=2.0)

    assert [(begin, end) for begin, end, _ in head.asked] == [(0.0, 0.5)]


def test_an_answer_asked_for_too_early_is_held_back_until_the_block_ends() -> None:
    twin = make_twin()
    twin.receive(b"TRIG:COUN 4;:POW:APER 0.1;:INIT\n", 1.0)
    twin.receive(FETCH + b"\n", 1.1)

    ready_s = twin.next_ready_s()

    assert ready_s == pytest.approx(1.4 + ANSWERS_IN_S)
    assert twin.take(1.39) == b""
    assert twin.take(1.4 + 2 * ANSWERS_IN_S).count(b",") == 4


def test_nothing_is_worked_out_before_it_has_ended() -> None:
    head = Ramp()
    twin = make_twin(head)
    twin.receive(b"TRIG:COUN 4;:POW:APER 0.1;:INIT\n", 1.0)

    twin.take(1.3)
    assert head.asked == []
    twin.receive(b"*ESE?\n", 1.5)
    assert len(head.asked) == 4


def test_a_block_can_be_fetched_again(wire: Wire) -> None:
    wire.send(b"INIT\n")

    first = wire.ask(b"FETC?", at_s=1.0)

    assert wire.ask(b"FETC?", at_s=2.0) == first


def test_without_a_measurement_there_is_nothing_to_fetch(wire: Wire) -> None:
    wire.send(b"POW:RANG 0.002\n")

    assert wire.ask(FETCH) == '2.000000E-03;0;-230,"Data corrupt or stale"'


@pytest.mark.parametrize("change", [b"POW:RANG 1E-5", b"TRIG:COUN 2", b"POW:APER 1", b"ABOR", b"*RST"])
def test_what_was_measured_before_a_change_is_stale(wire: Wire, change: bytes) -> None:
    wire.send(b"INIT\n")
    wire.ask(b"FETC?", at_s=1.0)

    wire.send(change + b"\n")

    assert wire.ask(b"FETC?;:SYST:ERR?") == '-230,"Data corrupt or stale"'


def test_a_second_start_while_measuring_is_ignored_and_told(wire: Wire) -> None:
    """SCPI-1999 volume 2, 24.3."""
    wire.send(b"TRIG:COUN 4;:POW:APER 0.1;:INIT;:INIT\n", at_s=1.0)

    assert wire.ask(b"SYST:ERR?") == '-213,"Init ignored"'
    assert len(levels_of(wire.ask(b"FETC?", at_s=3.0))) == 4


def test_a_start_after_an_abort_starts_anew() -> None:
    head = Ramp()
    wire = make_wire(head)
    wire.send(b"POW:APER 1;:INIT\n", at_s=0.0)
    wire.send(b"ABOR;:INIT\n", at_s=0.5)

    wire.ask(b"FETC?", at_s=3.0)

    assert [(begin, end) for begin, end, _ in head.asked] == [(0.5, 1.5)]


def test_read_does_all_in_one(wire: Wire) -> None:
    wire.send(b"TRIG:COUN 2;:POW:APER 0.5\nREAD?\n", at_s=1.0)

    assert wire.gather() == b"1.000000E-03,1.000000E-03\n"
    assert wire.now_s == pytest.approx(2.0 + ANSWERS_IN_S)


def test_operation_complete_waits_for_the_block(wire: Wire) -> None:
    wire.send(b"POW:APER 1;:INIT;*OPC?\n", at_s=0.0)

    assert wire.gather() == b"1\n"
    assert wire.now_s == pytest.approx(1.0 + ANSWERS_IN_S)


def test_the_operation_register_tells_that_it_measures(wire: Wire) -> None:
    wire.send(b"POW:APER 1;:INIT\n", at_s=0.0)

    assert wire.ask(b"STAT:OPER:COND?;EVEN?", at_s=0.5) == "16;16"
    assert wire.ask(b"STAT:OPER:COND?;EVEN?", at_s=1.5) == "0;0"


def test_while_it_measures_without_end_the_latest_block_is_fetched() -> None:
    head = Ramp()
    wire = make_wire(head)
    wire.send(b"POW:APER 1;:INIT:CONT ON\n", at_s=0.0)

    wire.ask(b"FETC?", at_s=0.25)
    wire.ask(b"FETC?", at_s=7.0)

    assert [(begin, end) for begin, end, _ in head.asked] == [(0.0, 1.0), (6.0, 7.0)]


def test_while_it_measures_without_end_a_start_is_ignored(wire: Wire) -> None:
    wire.send(b"INIT:CONT ON;:INIT\n")

    assert wire.ask(b"SYST:ERR?") == '-213,"Init ignored"'


# ranges and overload


def test_a_level_above_the_range_is_an_overload() -> None:
    wire = make_wire(Ramp(3e-4))
    wire.send(b"POW:RANG 2E-4;:INIT\n")

    assert wire.ask(FETCH, at_s=1.0) == '9.900000E+37;2.000000E-04;8;0,"No error"'


def test_one_overloaded_reading_leaves_the_others_as_they_are() -> None:
    wire = make_wire(Ramp(1.9e-4, 1e-5))
    wire.send(b"POW:RANG 2E-4;:TRIG:COUN 3;:POW:APER 0.6;:INIT\n", at_s=0.0)

    levels = levels_of(wire.ask(b"FETC?", at_s=5.0))

    assert levels == pytest.approx([1.93e-4, 1.99e-4, 9.9e37])


def test_the_questionable_bit_goes_when_the_next_block_is_good() -> None:
    head = Ramp(3e-4)
    wire = make_wire(head)
    wire.send(b"POW:RANG 2E-4;:INIT\n")
    wire.ask(b"FETC?", at_s=1.0)

    head.power_w = 1e-4
    wire.send(b"INIT\n")

    assert wire.ask(b"FETC?;:STAT:QUES:COND?;EVEN?", at_s=2.0) == "1.000000E-04;0;8"


def test_the_head_saturates_whatever_the_range() -> None:
    wire = Wire(make_twin(Ramp(1e-3), saturation=5e-4))
    wire.send(b"POW:RANG 2E-3;:INIT\n")

    assert levels_of(wire.ask(b"FETC?", at_s=1.0)) == [9.9e37]


@pytest.mark.parametrize(("power_w", "range_w"), [(1e-6, 2e-5), (1e-4, 2e-4), (1e-3, 2e-3), (5.0, 2e-3)])
def test_the_automatic_range_is_the_smallest_that_holds_the_power(power_w: float, range_w: float) -> None:
    wire = make_wire(Ramp(power_w))
    wire.send(b"POW:RANG:AUTO ON;:INIT\n")

    answer = wire.ask(b"FETC?;:POW:RANG?", at_s=1.0)

    assert float(answer.split(";")[1]) == range_w


def test_setting_a_range_ends_the_automatic_one(wire: Wire) -> None:
    assert wire.ask(b"POW:RANG:AUTO ON;:POW:RANG 2E-4;:POW:RANG:AUTO?;:POW:RANG?") == "0;2.000000E-04"


# noise


def noisy_levels(head: Ramp, range_w: float, *, seed: int = 5, relative: float = 0.0, count: int = 4000) -> list[float]:
    wire = make_wire(head, noise=normals(seed, "head 1"), relative=relative)
    return levels_of(wire.ask(f"POW:RANG {range_w};:TRIG:COUN {count};:POW:APER 1E-3;:READ?".encode()))


@pytest.mark.parametrize(("range_w", "noise_w"), list(zip(RANGES_W, NOISE_W, strict=True)))
def test_in_the_dark_the_noise_is_that_of_the_range(range_w: float, noise_w: float) -> None:
    levels = noisy_levels(Ramp(0.0), range_w)

    # five standard errors each
    assert abs(statistics.fmean(levels)) < 5 * noise_w / math.sqrt(4000)
    assert statistics.stdev(levels) == pytest.approx(noise_w, rel=5 / math.sqrt(8000))


def test_in_bright_light_the_noise_grows_with_the_power() -> None:
    levels = noisy_levels(Ramp(1e-3), 2e-3, relative=1e-3)

    expected = math.hypot(1e-7, 1e-6)
    assert statistics.fmean(levels) == pytest.approx(1e-3, abs=5 * expected / math.sqrt(4000))
    assert statistics.stdev(levels) == pytest.approx(expected, rel=5 / math.sqrt(8000))


def test_noise_in_the_dark_goes_below_zero() -> None:
    assert min(noisy_levels(Ramp(0.0), 2e-5, count=100)) < 0.0


def test_the_same_seed_reads_the_same_and_another_seed_does_not() -> None:
    head = Ramp(1e-3)

    assert noisy_levels(head, 2e-3, count=20) == noisy_levels(head, 2e-3, count=20)
    assert noisy_levels(head, 2e-3, count=20) != noisy_levels(head, 2e-3, count=20, seed=6)


# bytes


@pytest.mark.parametrize(
    "data",
    [
        b"TRIG:COUN 4;:POW:APER 0.1;:INIT\n" + FETCH + b"\n",
        b"READ?\nREAD?\n*IDN?\n",
        b"INIT;:INIT\nFETC?;:SYST:ERR?;:SYST:ERR?\n",
    ],
)
def test_torn_bytes_give_the_same_answers_as_whole_ones(data: bytes) -> None:
    twins = [make_twin(noise=normals(3, "head 1")) for _ in range(2)]

    assert whole(twins[0], data, at_s=1.0) == torn(twins[1], data, at_s=1.0)
