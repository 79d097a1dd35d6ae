"""The power meter's bytes on the wire, and what it makes of the answers."""

import math
from collections.abc import Callable

import pytest
from scpi_script import NO_ERROR, QUEUE, expect_resync
from scripted_twin import ADDRESS, Bench, with_defaults

from rigctl.errors import FramingError, LimitError, LinkTimeoutError, RefusedError, WrongInstrumentError
from rigctl.interfaces import Flag, Identity, MeterCapabilities
from rigctl_drivers.power_meter import DRIVER, ScpiPowerMeter
from rigctl_drivers.scpi_family import SCPI

END = b";:SYSTEM:ERROR:NEXT?\n"
OK = b';0,"No error"\n'
FETCH = b"FETCH?;:SENSE:POWER:RANGE:UPPER?;:STATUS:QUESTIONABLE:CONDITION?" + END
BEGIN = b"ABORT;:INITIATE:IMMEDIATE\n"


def make_meter(bench: Bench, **options: object) -> ScpiPowerMeter:
    return ScpiPowerMeter(bench.link, with_defaults(dict(DRIVER.options), **options))


def set_to(command: bytes, query: bytes) -> bytes:
    return command + b";:" + query + END


def expect_block_settings(bench: Bench) -> None:
    for header, word, answer in (
        (b"INITIATE:CONTINUOUS", b"OFF", b"0"),
        (b"TRIGGER:SOURCE", b"IMMEDIATE", b"IMM"),
        (b"SENSE:AVERAGE:STATE", b"OFF", b"0"),
        (b"FORMAT:DATA", b"ASCII", b"ASC,0"),
        (b"UNIT:POWER", b"W", b"W"),
    ):
        bench.twin.expect(set_to(header + b" " + word, header + b"?"), answer + OK)


def make_ready_meter(bench: Bench, readings: int = 3, aperture_s: float = 0.1) -> ScpiPowerMeter:
    """Return a meter whose dwell is set; what was sent for that is forgotten."""
    meter = make_meter(bench)
    expect_block_settings(bench)
    count, aperture = str(readings).encode(), f"{aperture_s:G}".encode()
    bench.twin.expect(set_to(b"TRIGGER:COUNT " + count, b"TRIGGER:COUNT?"), count + OK)
    bench.twin.expect(set_to(b"SENSE:POWER:APERTURE " + aperture, b"SENSE:POWER:APERTURE?"), aperture + OK)
    meter.set_dwell(readings, aperture_s)
    bench.twin.heard.clear()
    return meter


def test_identify_clears_the_queue_asks_who_is_there_and_then_something_only_a_meter_knows(
    scpi: Bench,
) -> None:
    scpi.twin.expect(b"*CLS;*IDN?\n", b"polrig,simulated power meter,head 7,1.0\n")
    scpi.twin.expect(b"SENSE:POWER:RANGE:UPPER?" + END, b"2.0E-02" + OK)

    identity = make_meter(scpi).identify()

    assert identity == Identity("polrig", "simulated power meter", "head 7", "1.0")
    assert identity.is_simulated


def test_an_instrument_that_does_not_know_a_power_range_is_the_wrong_one(scpi: Bench) -> None:
    scpi.twin.expect(b"*CLS;*IDN?\n", b"polrig,simulated switch,relays,1.0\n")
    scpi.twin.expect(b"SENSE:POWER:RANGE:UPPER?" + END, b'-113,"Undefined header"\n')
    scpi.twin.expect(QUEUE, NO_ERROR)

    with pytest.raises(WrongInstrumentError, match="'simulated switch', which is no power meter") as caught:
        make_meter(scpi).identify()

    assert caught.value.where == ADDRESS


def test_an_instrument_that_falls_silent_at_an_unknown_header_is_the_wrong_one(scpi: Bench) -> None:
    scpi.twin.expect(b"*CLS;*IDN?\n", b"ACME,relays,0,1\n")
    scpi.twin.expect(b"SENSE:POWER:RANGE:UPPER?" + END)
    expect_resync(scpi, now_s=SCPI.reply_timeout_s)
    scpi.twin.expect(QUEUE, b'-113,"Undefined header"\n')
    scpi.twin.expect(QUEUE, NO_ERROR)

    with pytest.raises(WrongInstrumentError, match="-113"):
        make_meter(scpi).identify()


def test_an_answer_that_is_no_identity_is_the_wrong_instrument(scpi: Bench) -> None:
    scpi.twin.expect(b"*CLS;*IDN?\n", b"error:1\n")

    with pytest.raises(WrongInstrumentError, match="error:1"):
        make_meter(scpi).identify()

    assert not scpi.link.is_in_step


def test_a_meter_that_refuses_for_another_reason_is_not_called_wrong(scpi: Bench) -> None:
    scpi.twin.expect(b"*CLS;*IDN?\n", b"ACME,PM,0,1\n")
    scpi.twin.expect(b"SENSE:POWER:RANGE:UPPER?" + END, b'-241,"Hardware missing"\n')
    scpi.twin.expect(QUEUE, NO_ERROR)

    with pytest.raises(RefusedError, match="Hardware missing"):
        make_meter(scpi).identify()


@pytest.mark.parametrize("answer", [b"785.2", b"7.852000E-07", b"785", b"7.852E+02"])
def test_the_wavelength_is_read_back_in_nm_or_in_m(scpi: Bench, answer: bytes) -> None:
    wavelength = b"SENSE:CORRECTION:WAVELENGTH"
    scpi.twin.expect(set_to(wavelength + b" 785.2 NM", wavelength + b"?"), answer + OK)

    make_meter(scpi).set_wavelength(785.2e-9)


@pytest.mark.parametrize("answer", [b"633", b"6.33E-07", b"785.2E-6", b"787"])
def test_another_wavelength_read_back_is_refused_with_both_values(scpi: Bench, answer: bytes) -> None:
    wavelength = b"SENSE:CORRECTION:WAVELENGTH"
    scpi.twin.expect(set_to(wavelength + b" 785.2 NM", wavelength + b"?"), answer + OK)

    with pytest.raises(RefusedError, match=f"set to 785.2 NM but reads back {answer.decode()}"):
        make_meter(scpi).set_wavelength(785.2e-9)


@pytest.mark.parametrize(
    ("power_w", "sent", "full_scale_w"),
    [
        (1.5e-3, b"0.002", 2e-3),
        (2e-3, b"0.002", 2e-3),
        (2e-3 * (1 + 1e-9), b"0.002", 2e-3),  # a range that went through arithmetic is still itself
        (2.001e-3, b"0.02", 2e-2),
        (0.0, b"2E-06", 2e-6),
        (2e-5, b"2E-05", 2e-5),
    ],
)
def test_the_smallest_range_that_holds_a_power_is_set_in_one_exchange(
    scpi: Bench, power_w: float, sent: bytes, full_scale_w: float
) -> None:
    upper = b"SENSE:POWER:RANGE:UPPER"
    answer = f"{full_scale_w:.1E}".encode()
    scpi.twin.expect(set_to(upper + b" " + sent, upper + b"?"), answer + OK)

    assert make_meter(scpi).set_range(power_w) == full_scale_w


def test_a_range_that_reads_back_as_another_is_refused_with_both_values(scpi: Bench) -> None:
    upper = b"SENSE:POWER:RANGE:UPPER"
    scpi.twin.expect(set_to(upper + b" 0.002", upper + b"?"), b"2.0E-02" + OK)

    with pytest.raises(RefusedError, match=r"set to 0\.002 but reads back 2\.0E-02") as caught:
        make_meter(scpi).set_range(1e-3)

    assert caught.value.address == ADDRESS


def test_a_power_beyond_the_largest_range_is_refused_before_anything_is_sent(scpi: Bench) -> None:
    with pytest.raises(LimitError, match=r"0\.03 W is more than the largest range, 0\.02 W"):
        make_meter(scpi).set_range(30e-3)

    assert scpi.twin.heard == []


def test_no_power_asks_for_the_automatic_range_and_returns_the_present_one(scpi: Bench) -> None:
    auto = b"SENSE:POWER:RANGE:AUTO"
    scpi.twin.expect(set_to(auto + b" ON", auto + b"?"), b"1" + OK)
    scpi.twin.expect(b"SENSE:POWER:RANGE:UPPER?" + END, b"2.0E-04" + OK)

    assert make_meter(scpi).set_range(None) == 2e-4


def test_an_automatic_range_that_stays_off_is_refused(scpi: Bench) -> None:
    auto = b"SENSE:POWER:RANGE:AUTO"
    scpi.twin.expect(set_to(auto + b" ON", auto + b"?"), b"0" + OK)

    with pytest.raises(RefusedError, match="AUTO was set to ON but reads back 0"):
        make_meter(scpi).set_range(None)


def test_a_complaint_is_raised_with_code_and_text_and_the_queue_is_emptied(scpi: Bench) -> None:
    upper = b"SENSE:POWER:RANGE:UPPER"
    scpi.twin.expect(set_to(upper + b" 0.002", upper + b"?"), b'2.0E-02;-222,"Data out of range;0.002"\n')
    scpi.twin.expect(QUEUE, b'-221,"Settings conflict"\n')
    scpi.twin.expect(QUEUE, NO_ERROR)

    with pytest.raises(RefusedError) as caught:
        make_meter(scpi).set_range(1e-3)

    assert (caught.value.code, caught.value.text) == (-222, "Data out of range;0.002")
    assert scpi.link.is_in_step


def test_a_dwell_is_set_up_as_one_block_of_plain_readings_in_watts(scpi: Bench) -> None:
    meter = make_ready_meter(scpi, readings=4, aperture_s=0.1)

    scpi.twin.expect(BEGIN)
    assert meter.begin_dwell().due_s == pytest.approx(0.4)


def test_a_trigger_count_that_is_cut_down_is_refused(scpi: Bench) -> None:
    meter = make_meter(scpi)
    expect_block_settings(scpi)
    scpi.twin.expect(set_to(b"TRIGGER:COUNT 5000", b"TRIGGER:COUNT?"), b"1000" + OK)

    with pytest.raises(RefusedError, match="TRIGGER:COUNT was set to 5000 but reads back 1000"):
        meter.set_dwell(5000, 0.1)


@pytest.mark.parametrize("aperture_s", [1e-4, 11.0, -1.0, math.nan])
def test_an_aperture_that_no_meter_has_is_refused_before_anything_is_sent(scpi: Bench, aperture_s: float) -> None:
    with pytest.raises(LimitError, match="outside what this meter integrates"):
        make_meter(scpi).set_dwell(1, aperture_s)

    assert scpi.twin.heard == []


def test_a_dwell_begins_without_an_answer_and_comes_back_whole_in_one_exchange(scpi: Bench) -> None:
    meter = make_ready_meter(scpi)
    scpi.timeline.wait_until(10.0)
    scpi.twin.expect(BEGIN)
    scpi.twin.expect(FETCH, b"1.0E-03,1.1E-03,1.2E-03;2.0E-03;0" + OK)

    begun = meter.begin_dwell()
    scpi.timeline.wait_until(begun.due_s)
    dwell = begun.poll()

    assert scpi.twin.heard == [BEGIN, FETCH]
    assert dwell is not None
    assert dwell.levels_w == (1.0e-3, 1.1e-3, 1.2e-3)
    assert (dwell.flags, dwell.range_w) == (Flag(0), 2.0e-3)
    assert (dwell.began_s, dwell.ended_s) == pytest.approx((10.0, 10.3))


def test_a_dwell_that_is_asked_for_too_early_waits_for_the_held_back_reply(scpi: Bench) -> None:
    meter = make_ready_meter(scpi, readings=1, aperture_s=5.0)
    scpi.twin.expect(BEGIN)
    scpi.twin.expect(FETCH, b"1.0E-03;2.0E-03;0" + OK, after_s=5.0)

    dwell = meter.begin_dwell().poll()

    assert dwell is not None
    assert scpi.timeline.now() == 5.0


@pytest.mark.parametrize(
    ("answer", "flags"),
    [
        (b"9.9E37,1E-3,1E-3;2E-3;8", Flag.OVERLOAD | Flag.QUESTIONABLE),
        (b"-9.9E37,1E-3,1E-3;2E-3;0", Flag.UNDERRANGE),
        (b"9.91E37,1E-3,1E-3;2E-3;0", Flag.NOT_A_NUMBER),
        (b"1E-3,1E-3,1E-3;2E-3;256", Flag.QUESTIONABLE),
    ],
)
def test_what_is_wrong_with_a_dwell_becomes_its_flags(scpi: Bench, answer: bytes, flags: Flag) -> None:
    meter = make_ready_meter(scpi)
    scpi.twin.expect(BEGIN)
    scpi.twin.expect(FETCH, answer + OK)

    dwell = meter.begin_dwell().poll()

    assert dwell is not None
    assert dwell.flags == flags
    assert sum(map(math.isnan, dwell.levels_w)) == (0 if flags == Flag.QUESTIONABLE else 1)


def test_a_block_that_the_meter_forgot_is_refused_with_its_reason(scpi: Bench) -> None:
    meter = make_ready_meter(scpi)
    scpi.twin.expect(BEGIN)
    scpi.twin.expect(FETCH, b'2.0E-03;0;-230,"Data corrupt or stale"\n')
    scpi.twin.expect(QUEUE, NO_ERROR)

    with pytest.raises(RefusedError) as caught:
        meter.begin_dwell().poll()

    assert caught.value.code == -230


@pytest.mark.parametrize(
    "answer",
    [
        b"1E-3,1E-3;2E-3;0" + OK,
        b"1E-3,1E-3,1E-3,1E-3;2E-3;0" + OK,
        b"1E-3,1E-3,1E-3;2E-3" + OK,
        b"1E-3,x,1E-3;2E-3;0" + OK,
        b"1E-3,1E-3,1E-3;2E-3;0\n",
        b"\n",
    ],
)
def test_a_reply_that_is_none_is_refused_and_the_link_resyncs_before_the_next(scpi: Bench, answer: bytes) -> None:
    meter = make_ready_meter(scpi)
    scpi.twin.expect(BEGIN)
    scpi.twin.expect(FETCH, answer)

    with pytest.raises(FramingError):
        meter.begin_dwell().poll()

    assert not scpi.link.is_in_step


def test_a_reply_that_comes_byte_by_byte_is_read_whole(scpi: Bench) -> None:
    meter = make_ready_meter(scpi)
    scpi.twin.expect(BEGIN)
    scpi.twin.expect(FETCH, b"1E-3,1E-3,1E-3;2E-3;0" + OK, drips_s=0.01)

    assert meter.begin_dwell().poll() is not None


def test_a_reply_that_is_cut_is_never_taken_for_a_reading(scpi: Bench) -> None:
    whole = b"1E-3,1E-3,1E-3;2E-3;0" + OK
    meter = make_ready_meter(scpi)
    for end in range(len(whole)):
        scpi.twin.expect(BEGIN)
        scpi.twin.expect(FETCH, whole[:end])
        expect_resync(scpi, before=b"\n", now_s=scpi.timeline.now() + SCPI.reply_timeout_s + 3 * 0.1)
        scpi.twin.expect(QUEUE, NO_ERROR)
        with pytest.raises(LinkTimeoutError) as caught:
            meter.begin_dwell().poll()
        assert caught.value.partial == whole[:end]


def test_settings_are_read_back_in_one_exchange_and_in_base_units(scpi: Bench) -> None:
    scpi.twin.expect(
        b"SENSE:POWER:RANGE:UPPER?;:SENSE:POWER:RANGE:AUTO?;:SENSE:POWER:APERTURE?;:TRIGGER:COUNT?;"
        b":SENSE:CORRECTION:WAVELENGTH?;:UNIT:POWER?" + END,
        b"2.0E-03;0;1.0E-01;4;785.2;W" + OK,
    )

    settings = make_meter(scpi).settings()

    assert settings == {
        "range_w": 2e-3,
        "ranging": "fixed",
        "aperture_s": 0.1,
        "readings": 4.0,
        "wavelength_m": pytest.approx(785.2e-9),
        "unit": "W",
    }


def test_capabilities_follow_the_rig_file() -> None:
    able = DRIVER.capabilities(with_defaults(dict(DRIVER.options), ranges=(2e-3, 2e-6), noise=1e-11))

    assert isinstance(able, MeterCapabilities)
    assert able.ranges_w == (2e-6, 2e-3)
    assert able.time_constant_s == (10e-3, 10e-3)
    assert able.noise_w == pytest.approx((1e-11, 1e-8))
    assert able.saturation_w == 2e-3


def test_a_saturation_that_is_given_is_taken() -> None:
    able = DRIVER.capabilities(with_defaults(dict(DRIVER.options), saturation=5e-3))

    assert isinstance(able, MeterCapabilities)
    assert able.saturation_w == 5e-3


def test_no_option_reaches_the_wire_by_itself(scpi: Bench) -> None:
    make: Callable[..., object] = DRIVER.open

    make(scpi.link, with_defaults(dict(DRIVER.options)))

    assert scpi.twin.heard == []
