"""The temperature controller's bytes on the wire, and when a sensor's reading is no temperature."""

import pytest
from scpi_script import NO_ERROR, QUEUE
from scripted_twin import ADDRESS, Bench, with_defaults

from rigctl.errors import FramingError, InstrumentError, RefusedError, WrongInstrumentError
from rigctl.interfaces import ControllerCapabilities, Identity
from rigctl.thermistor import Beta, SteinhartHart
from rigctl_drivers.temperature_controller import DRIVER, ScpiTemperatureController

END = b";:SYSTEM:ERROR:NEXT?\n"
OK = b';0,"No error"\n'
SPOINT = b"SOURCE1:TEMPERATURE:SPOINT"
LOW = b"SOURCE1:TEMPERATURE:LIMIT:LOW"
HIGH = b"SOURCE1:TEMPERATURE:LIMIT:HIGH"
CURVE = b"SENSE1:TEMPERATURE:THERMISTOR:SHHART"
BETA = b"SENSE1:TEMPERATURE:THERMISTOR:BETA"
CONDITIONS = b"MEASURE1:TEMPERATURE?;:MEASURE1:RESISTANCE?;:OUTPUT1:STATE?;:STATUS:QUESTIONABLE:CONDITION?" + END
ON = b"OUTPUT1:STATE ON;:OUTPUT1:STATE?" + END
OFF_AT_ONCE = b"\nOUTPUT1:STATE OFF\n"
OFF = b"OUTPUT1:STATE OFF;:OUTPUT1:STATE?" + END

TEN_KOHM = SteinhartHart(1.12924e-3, 2.34108e-4, 8.7755e-8)
PART_OF_3976_K = Beta(10e3, 25.0, 3976.0)
AT_25_C = b"25.001;9999.9;1;0" + OK


def make_controller(bench: Bench, **options: object) -> ScpiTemperatureController:
    given: dict[str, object] = {"thermistor": TEN_KOHM, **options}
    return ScpiTemperatureController(bench.link, with_defaults(dict(DRIVER.options), **given))


def set_to(header: bytes, value: bytes) -> bytes:
    return header + b" " + value + b";:" + header + b"?" + END


def expect_sensor(bench: Bench) -> None:
    bench.twin.expect(set_to(CURVE, b"0.00112924,0.000234108,8.7755E-08"), b"1.12924E-03,2.34108E-04,8.7755E-08" + OK)


def expect_limits(bench: Bench, highest: bytes = b"60") -> None:
    bench.twin.expect(HIGH + b"?" + END, highest + OK)
    bench.twin.expect(set_to(LOW, b"10"), b"10.0" + OK)
    bench.twin.expect(set_to(HIGH, b"40"), b"40.0" + OK)


def programmed(bench: Bench, **options: object) -> ScpiTemperatureController:
    """Return a controller whose sensor and limits stand; what was sent for that is forgotten."""
    controller = make_controller(bench, **options)
    expect_sensor(bench)
    expect_limits(bench)
    bench.twin.expect(CONDITIONS, AT_25_C)
    controller.set_span(10.0, 40.0)
    bench.twin.heard.clear()
    return controller


def test_identify_asks_for_a_setpoint_that_only_a_controller_has(scpi: Bench) -> None:
    scpi.twin.expect(b"*CLS;*IDN?\n", b"polrig,simulated temperature controller,tec 1,1.0\n")
    scpi.twin.expect(SPOINT + b"?" + END, b"25" + OK)

    assert make_controller(scpi).identify() == Identity("polrig", "simulated temperature controller", "tec 1", "1.0")


def test_a_channel_that_is_no_controller_is_the_wrong_instrument(scpi: Bench) -> None:
    scpi.twin.expect(b"*CLS;*IDN?\n", b"polrig,simulated rack,rack 1,1.0\n")
    scpi.twin.expect(SPOINT + b"?" + END, b'-114,"Header suffix out of range"\n')
    scpi.twin.expect(QUEUE, NO_ERROR)

    with pytest.raises(WrongInstrumentError, match="which is no temperature controller"):
        make_controller(scpi).identify()


def test_the_sensor_s_constants_are_programmed_before_the_limits_and_the_sensor_is_read(scpi: Bench) -> None:
    expect_sensor(scpi)
    expect_limits(scpi)
    scpi.twin.expect(CONDITIONS, AT_25_C)

    make_controller(scpi).set_span(10.0, 40.0)


def test_constants_of_the_other_form_are_programmed_in_that_form(scpi: Bench) -> None:
    scpi.twin.expect(set_to(BETA, b"10000,25,3976"), b"1.0E+04,25.0,3976" + OK)
    expect_limits(scpi)
    scpi.twin.expect(CONDITIONS, AT_25_C)

    make_controller(scpi, thermistor=PART_OF_3976_K).set_span(10.0, 40.0)


@pytest.mark.parametrize(
    "answer", [b"1.12924E-03,2.34108E-04,8.5E-08", b"1.0E-03,2.34108E-04,8.7755E-08", b"1.12924E-03,2.3E-04,8.8E-08"]
)
def test_constants_that_read_back_as_others_are_refused(scpi: Bench, answer: bytes) -> None:
    scpi.twin.expect(set_to(CURVE, b"0.00112924,0.000234108,8.7755E-08"), answer + OK)

    with pytest.raises(RefusedError, match=r"SHHART was set to 0\.00112924,0\.000234108,8\.7755E-08 but reads back"):
        make_controller(scpi).set_span(10.0, 40.0)


def test_constants_of_which_one_is_missing_are_no_answer(scpi: Bench) -> None:
    scpi.twin.expect(set_to(CURVE, b"0.00112924,0.000234108,8.7755E-08"), b"1.12924E-03,2.34108E-04" + OK)

    with pytest.raises(FramingError, match="2 numbers instead of 3"):
        make_controller(scpi).set_span(10.0, 40.0)


def test_the_upper_limit_goes_first_where_the_lower_one_would_pass_it(scpi: Bench) -> None:
    expect_sensor(scpi)
    scpi.twin.expect(HIGH + b"?" + END, b"30" + OK)
    scpi.twin.expect(set_to(HIGH, b"60"), b"60" + OK)
    scpi.twin.expect(set_to(LOW, b"30"), b"30" + OK)
    scpi.twin.expect(CONDITIONS, b"35.0;6531.0;0;0" + OK)

    make_controller(scpi).set_span(30.0, 60.0)


@pytest.mark.parametrize(("asked_c", "sent", "answer"), [(14.532, b"14.532", b"14.5"), (0.0, b"0", b"-0.04")])
def test_limits_may_be_rounded_to_a_tenth_of_a_kelvin(scpi: Bench, asked_c: float, sent: bytes, answer: bytes) -> None:
    expect_sensor(scpi)
    scpi.twin.expect(HIGH + b"?" + END, b"60" + OK)
    scpi.twin.expect(set_to(LOW, sent), answer + OK)
    scpi.twin.expect(set_to(HIGH, b"40"), b"40" + OK)
    scpi.twin.expect(CONDITIONS, AT_25_C)

    make_controller(scpi).set_span(asked_c, 40.0)


@pytest.mark.parametrize("answer", [b"5.0", b"10.06", b"9.94"])
def test_a_limit_that_the_instrument_does_not_take_is_refused(scpi: Bench, answer: bytes) -> None:
    expect_sensor(scpi)
    scpi.twin.expect(HIGH + b"?" + END, b"60" + OK)
    scpi.twin.expect(set_to(LOW, b"10"), answer + OK)

    with pytest.raises(RefusedError, match="LIMIT:LOW was set to 10 but reads back"):
        make_controller(scpi).set_span(10.0, 40.0)


@pytest.mark.parametrize(
    ("asked_c", "sent", "answer"),
    [(24.0, b"24", b"2.4E+01"), (22.3456, b"22.3456", b"22.346"), (0.0, b"0", b"0.0004"), (-5.0, b"-5", b"-5.000")],
)
def test_the_setpoint_is_set_and_read_back_to_the_step_of_the_controller(
    scpi: Bench, asked_c: float, sent: bytes, answer: bytes
) -> None:
    scpi.twin.expect(set_to(SPOINT, sent), answer + OK)

    assert make_controller(scpi).set_temperature(asked_c) == float(answer)


@pytest.mark.parametrize("answer", [b"24.01", b"297.15", b"-24", b"0"])
def test_another_setpoint_read_back_is_refused(scpi: Bench, answer: bytes) -> None:
    scpi.twin.expect(set_to(SPOINT, b"24"), answer + OK)

    with pytest.raises(RefusedError, match="SPOINT was set to 24 but reads back"):
        make_controller(scpi, resolution=1e-3).set_temperature(24.0)


def test_every_command_goes_to_the_channel_of_the_rig_file(scpi: Bench) -> None:
    def on_2(data: bytes) -> bytes:
        for head in (b"SOURCE", b"OUTPUT", b"MEASURE"):
            data = data.replace(head + b"1", head + b"2")
        return data

    controller = make_controller(scpi, channel=2)
    scpi.twin.expect(on_2(set_to(SPOINT, b"24")), b"24" + OK)
    scpi.twin.expect(on_2(ON), b"1" + OK)
    scpi.twin.expect(on_2(CONDITIONS), AT_25_C)
    scpi.twin.expect(on_2(OFF_AT_ONCE))
    scpi.twin.expect(on_2(OFF), b"0" + OK)

    controller.set_temperature(24.0)
    controller.set_output(True)
    controller.conditions()
    controller.set_output(False)


def test_the_temperature_comes_from_the_resistance_in_one_exchange(scpi: Bench) -> None:
    scpi.twin.expect(CONDITIONS, b"20.894;12000;1;0" + OK)

    seen = make_controller(scpi).conditions()

    assert seen.temperature_c == pytest.approx(20.8937, abs=1e-4)
    assert (seen.resistance_ohm, seen.is_on, seen.is_at_limit) == (12e3, True, False)


def test_without_constants_the_temperature_is_what_the_instrument_shows(scpi: Bench) -> None:
    controller = make_controller(scpi, thermistor=None)
    expect_limits(scpi)
    scpi.twin.expect(CONDITIONS, b"20.36;12000;0;0" + OK)
    scpi.twin.expect(CONDITIONS, b"20.37;12000;0;0" + OK)

    controller.set_span(10.0, 40.0)

    assert controller.conditions().temperature_c == 20.37


@pytest.mark.parametrize("sensor", [TEN_KOHM, PART_OF_3976_K, None])
@pytest.mark.parametrize(
    "answer",
    [
        b"9.91E37;9.9E37",  # open, as the standard would have it
        b"-273;9.9E37",
        b"-60.0;1000000",  # open, with moisture across it
        b"250;20",  # shorted, by its leads
        b"9.9E37;0",
        b"9.9E37;-1",
        b"9.9E37;9.91E37",  # not measured at all
    ],
)
def test_a_sensor_that_is_open_or_shorted_is_a_fault_and_no_temperature(
    scpi: Bench, sensor: SteinhartHart | Beta | None, answer: bytes
) -> None:
    scpi.twin.expect(CONDITIONS, answer + b";1;16" + OK)

    with pytest.raises(InstrumentError, match="it is open, shorted or not the one") as caught:
        make_controller(scpi, thermistor=sensor).conditions()

    assert caught.value.where == f"{ADDRESS}, channel 1"
    assert "leads" in caught.value.do


@pytest.mark.parametrize(
    ("span", "temperature_c", "is_fault"),
    [
        ((5.0, 80.0), -39.0, False),
        ((5.0, 80.0), -41.0, True),
        ((5.0, 80.0), 119.0, False),
        ((5.0, 80.0), 121.0, True),
        ((50.0, 120.0), -39.0, False),  # an oven in a cold room
        ((50.0, 120.0), -41.0, True),
        ((50.0, 120.0), 159.0, False),
        ((50.0, 120.0), 161.0, True),
        ((-30.0, -20.0), -69.0, False),
        ((-30.0, -20.0), -71.0, True),
        ((-30.0, -20.0), 79.0, False),  # a cooler that is warm
        ((-30.0, -20.0), 81.0, True),
    ],
)
def test_what_is_no_temperature_follows_from_the_span_of_the_plant_and_the_room(
    scpi: Bench, span: tuple[float, float], temperature_c: float, is_fault: bool
) -> None:
    ohm = f"{TEN_KOHM.resistance_ohm(temperature_c):.6E}".encode()
    scpi.twin.expect(CONDITIONS, f"{temperature_c}".encode() + b";" + ohm + b";0;0" + OK)
    controller = make_controller(scpi, span=span)

    if is_fault:
        with pytest.raises(InstrumentError):
            controller.conditions()
    else:
        assert controller.conditions().temperature_c == pytest.approx(temperature_c, abs=1e-3)


@pytest.mark.parametrize("shown", [b"20.36", b"294.05", b"9.91E37", b"69.6"])
def test_an_instrument_that_makes_another_temperature_of_its_sensor_is_told_so(scpi: Bench, shown: bytes) -> None:
    controller = programmed(scpi)
    scpi.twin.expect(CONDITIONS, shown + b";12000;1;0" + OK)

    with pytest.raises(InstrumentError, match=r"its sensor's constants give 20\.89 degC") as caught:
        controller.conditions()

    assert "constants" in caught.value.do


def test_before_the_constants_are_programmed_the_instrument_may_have_others(scpi: Bench) -> None:
    scpi.twin.expect(CONDITIONS, b"20.36;12000;1;0" + OK)

    assert make_controller(scpi).conditions().temperature_c == pytest.approx(20.894, abs=1e-3)


def test_a_fault_of_the_sensor_is_found_when_the_span_is_set_and_before_anything_regulates(scpi: Bench) -> None:
    controller = make_controller(scpi)
    expect_sensor(scpi)
    expect_limits(scpi)
    scpi.twin.expect(CONDITIONS, b"9.91E37;9.9E37;0;16" + OK)

    with pytest.raises(InstrumentError, match="open"):
        controller.set_span(10.0, 40.0)


@pytest.mark.parametrize(("status", "is_at_limit"), [(b"0", False), (b"16", True), (b"529", True), (b"513", False)])
def test_only_the_bit_of_the_temperature_tells_of_a_limit(scpi: Bench, status: bytes, is_at_limit: bool) -> None:
    scpi.twin.expect(CONDITIONS, b"25;10000;1;" + status + OK)

    assert make_controller(scpi).conditions().is_at_limit is is_at_limit


def test_a_limit_is_seen_although_the_instrument_complains_of_it(scpi: Bench) -> None:
    scpi.twin.expect(CONDITIONS, b'25;10000;0;16;-240,"Hardware error"\n')
    scpi.twin.expect(QUEUE, NO_ERROR)

    assert make_controller(scpi).conditions().is_at_limit


def test_a_complaint_that_the_conditions_do_not_explain_is_raised(scpi: Bench) -> None:
    scpi.twin.expect(CONDITIONS, b'25;10000;1;0;-310,"System error"\n')
    scpi.twin.expect(QUEUE, NO_ERROR)

    with pytest.raises(RefusedError, match="System error"):
        make_controller(scpi).conditions()


def test_regulating_starts_and_reads_back(scpi: Bench) -> None:
    scpi.twin.expect(ON, b"1" + OK)

    assert make_controller(scpi).set_output(True) is True


@pytest.mark.parametrize(
    ("conditions", "words"),
    [
        (b"50;3603;0;16", "a temperature limit keeps it from regulating"),
        (b"9.91E37;9.9E37;0;0", "the sensor reads inf ohm"),
        (b"25;10000;0;0", "the output does not go on"),
    ],
)
def test_a_controller_that_does_not_start_tells_why(scpi: Bench, conditions: bytes, words: str) -> None:
    scpi.twin.expect(ON, b'0;-221,"Settings conflict"\n' if b"9.9" in conditions else b"0" + OK)
    if b"9.9" in conditions:
        scpi.twin.expect(QUEUE, NO_ERROR)
    scpi.twin.expect(CONDITIONS, conditions + OK)

    with pytest.raises(InstrumentError, match=words):
        make_controller(scpi).set_output(True)


def test_regulating_ends_whatever_the_instrument_complains_of(scpi: Bench) -> None:
    scpi.twin.expect(OFF_AT_ONCE)
    scpi.twin.expect(OFF, b'0;-240,"Hardware error;sensor open"\n')
    scpi.twin.expect(QUEUE, NO_ERROR)

    assert make_controller(scpi).set_output(False) is False


def test_a_controller_that_goes_on_regulating_raises(scpi: Bench) -> None:
    scpi.twin.expect(OFF_AT_ONCE)
    scpi.twin.expect(OFF, b"1" + OK)

    with pytest.raises(InstrumentError, match="reads back on"):
        make_controller(scpi).set_output(False)


@pytest.mark.parametrize(
    "answer",
    [
        b"25;10000;1" + OK,
        b"25;10000;1;0;0" + OK,
        b"25 C;10000;1;0" + OK,
        b"25;10k;1;0" + OK,
        b"25;10000;ON;0" + OK,
        b"25;10000;1;1.6E1" + OK,
    ],
)
def test_conditions_that_are_none_are_refused(scpi: Bench, answer: bytes) -> None:
    scpi.twin.expect(CONDITIONS, answer)

    with pytest.raises(FramingError):
        make_controller(scpi).conditions()

    assert not scpi.link.is_in_step


@pytest.mark.parametrize(
    ("sensor", "header", "answer", "words"),
    [
        (TEN_KOHM, CURVE, b"1.12924E-03,2.34108E-04,8.7755E-08", "A 0.00112924, B 0.000234108, C 8.7755e-08"),
        (PART_OF_3976_K, BETA, b"10000,25,3976", str(PART_OF_3976_K)),
    ],
)
def test_settings_tell_the_constants_that_the_temperatures_come_from(
    scpi: Bench, sensor: SteinhartHart | Beta, header: bytes, answer: bytes, words: str
) -> None:
    scpi.twin.expect(SPOINT + b"?;:" + LOW + b"?;:" + HIGH + b"?;:OUTPUT1:STATE?" + END, b"24.0;10;40;1" + OK)
    scpi.twin.expect(header + b"?" + END, answer + OK)

    assert make_controller(scpi, thermistor=sensor).settings() == {
        "setpoint_c": 24.0,
        "lowest_c": 10.0,
        "highest_c": 40.0,
        "output": "on",
        "thermistor": words,
    }


def test_settings_without_constants_say_whose_they_are(scpi: Bench) -> None:
    scpi.twin.expect(SPOINT + b"?;:" + LOW + b"?;:" + HIGH + b"?;:OUTPUT1:STATE?" + END, b"24.0;10;40;0" + OK)

    settings = make_controller(scpi, thermistor=None).settings()

    assert (settings["output"], settings["thermistor"]) == ("off", "as set on the instrument")


def test_capabilities_follow_the_rig_file() -> None:
    options = with_defaults(dict(DRIVER.options), span=(15.0, 45.0), resolution=0.01, typical_rate=0.02)

    assert DRIVER.capabilities(options) == ControllerCapabilities(
        span_c=(15.0, 45.0), resolution_k=0.01, typical_rate_k_per_s=0.02
    )
