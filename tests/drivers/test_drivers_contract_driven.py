"""Current sources and temperature controllers against their twins: what drives a diode, alone and in one rack."""

from collections.abc import Iterator

import pytest
from scripted_twin import with_defaults
from twin_places import Place, Transport, place
from twin_table import (
    DRIVERS,
    NOISE_K,
    ROOM_C,
    SENSOR,
    SERIES_OHM,
    SHUTTER,
    SLIDE,
    TURN_ON_V,
    controller_twin,
    rack_twin,
    source_twin,
)

from rigctl.errors import InstrumentError, RefusedError, StopRequestedError, WrongInstrumentError
from rigctl.thermistor import Beta
from rigctl_drivers import current_source, temperature_controller
from rigctl_drivers.current_source import ScpiCurrentSource
from rigctl_drivers.slide import ScpiSlide
from rigctl_drivers.switch import ScpiSwitch
from rigctl_drivers.temperature_controller import ScpiTemperatureController

SOURCE, CONTROLLER = DRIVERS["scpi-current-source"], DRIVERS["scpi-temperature-controller"]


def source_at(at: Place) -> ScpiCurrentSource:
    return ScpiCurrentSource(at.link, SOURCE.options)


def controller_at(at: Place, **options: object) -> ScpiTemperatureController:
    return ScpiTemperatureController(at.link, {**CONTROLLER.options, **options})


def wait(at: Place, duration_s: float) -> None:
    at.timeline.wait_until(at.timeline.now() + duration_s)


def driven(at: Place) -> ScpiCurrentSource:
    """Return a source with 34 mA through its diode."""
    source = source_at(at)
    source.set_limit(0.045)
    source.set_compliance(2.5)
    source.set_current(0.0)
    source.set_output(True)
    source.set_current(0.034)
    wait(at, 0.05)
    return source


@pytest.fixture
def diode(transport: Transport) -> Iterator[tuple[Place, ScpiCurrentSource]]:
    with place(transport, SOURCE.driver, source_twin()) as at:
        yield at, driven(at)


@pytest.fixture
def plant(transport: Transport) -> Iterator[tuple[Place, ScpiTemperatureController]]:
    with place(transport, CONTROLLER.driver, controller_twin()) as at:
        yield at, controller_at(at)


@pytest.fixture
def rack(transport: Transport) -> Iterator[Place]:
    with place(transport, SOURCE.driver, rack_twin()) as at:
        yield at


def test_what_flows_through_the_diode_is_read_back(diode: tuple[Place, ScpiCurrentSource]) -> None:
    _, source = diode

    seen = source.conditions()

    assert seen.current_a == pytest.approx(0.034, abs=1e-6)
    assert seen.voltage_v == pytest.approx(TURN_ON_V + 0.034 * SERIES_OHM, abs=1e-3)
    assert (seen.is_on, seen.is_tripped, seen.is_interlock_open, seen.is_at_compliance) == (True, False, False, False)


def test_off_is_off_and_may_be_asked_for_again_and_again(diode: tuple[Place, ScpiCurrentSource]) -> None:
    at, source = diode

    assert [source.set_output(False) for _ in range(3)] == [False] * 3

    wait(at, 0.05)
    seen = source.conditions()
    assert (seen.is_on, seen.current_a) == (False, 0.0)


def test_a_current_beyond_the_limit_on_the_instrument_is_refused_and_the_old_one_stays(
    diode: tuple[Place, ScpiCurrentSource],
) -> None:
    _, source = diode

    with pytest.raises(RefusedError) as caught:
        source.set_current(0.050)

    assert caught.value.code == -222
    assert source.settings() == {"setpoint_a": 0.034, "limit_a": 0.045, "compliance_v": 2.5, "output": "on"}


def test_a_ramp_in_small_steps_is_read_back_step_by_step(diode: tuple[Place, ScpiCurrentSource]) -> None:
    _, source = diode

    read = [source.set_current(0.034 - 0.0001234 * step) for step in range(12)]

    assert read == pytest.approx([0.034 - 0.0001234 * step for step in range(12)], abs=5.1e-6)


def test_a_diode_that_asks_for_too_much_voltage_trips_and_can_still_be_switched_off(
    diode: tuple[Place, ScpiCurrentSource],
) -> None:
    _, source = diode
    source.set_compliance(1.6)

    seen = source.conditions()

    assert (seen.is_on, seen.is_tripped, seen.is_at_compliance) == (False, True, True)
    assert source.set_output(False) is False


def test_a_source_that_has_tripped_does_not_go_on_and_says_so(diode: tuple[Place, ScpiCurrentSource]) -> None:
    _, source = diode
    source.set_compliance(1.6)
    source.set_output(False)

    with pytest.raises(InstrumentError, match="a protection has tripped") as caught:
        source.set_output(True)

    assert "clear the trip" in caught.value.do
    assert source.set_output(False) is False


def test_a_source_that_trips_as_it_goes_on_says_so(transport: Transport) -> None:
    with place(transport, SOURCE.driver, source_twin()) as at:
        source = source_at(at)
        source.set_compliance(1.6)
        source.set_current(0.034)

        with pytest.raises(InstrumentError, match="a protection has tripped"):
            source.set_output(True)


def test_an_open_interlock_is_told_in_words_and_off_is_still_off(transport: Transport) -> None:
    with place(transport, SOURCE.driver, source_twin(interlock_opens_at_s=0.0)) as at:
        source = source_at(at)

        with pytest.raises(InstrumentError, match="the interlock is open"):
            source.set_output(True)

        assert source.conditions().is_interlock_open
        assert source.set_output(False) is False


def test_an_interlock_that_opens_on_the_way_is_seen() -> None:
    with place("loopback", SOURCE.driver, source_twin(interlock_opens_at_s=10.0)) as at:
        source = driven(at)
        assert source.conditions().is_on
        at.timeline.wait_until(11.0)

        seen = source.conditions()

        assert (seen.is_on, seen.is_interlock_open, seen.current_a) == (False, True, 0.0)


def test_off_gets_through_after_a_half_sent_command_and_unread_replies(
    diode: tuple[Place, ScpiCurrentSource],
) -> None:
    at, source = diode
    at.link.write(b"MEASURE1:CURRENT?\n*OPC?\nSOURCE1:CURR")
    wait(at, 0.05)
    at.link.mark_out_of_step()

    assert source.set_output(False) is False
    assert not source.conditions().is_on


def test_off_gets_through_with_a_stop_request_that_is_held_back(diode: tuple[Place, ScpiCurrentSource]) -> None:
    at, source = diode
    at.timeline.stop.request("SIGTERM")
    with pytest.raises(StopRequestedError):
        source.conditions()

    with at.timeline.stop.masked():
        assert source.set_output(False) is False


def test_off_is_confirmed_while_the_queue_is_full_of_complaints(diode: tuple[Place, ScpiCurrentSource]) -> None:
    at, source = diode
    at.link.write(b"NO:SUCH:HEADER\n" * 40)

    assert source.set_output(False) is False
    assert source.set_current(0.0) == 0.0


def test_a_temperature_is_reached_and_comes_from_the_resistance(
    plant: tuple[Place, ScpiTemperatureController],
) -> None:
    at, controller = plant
    controller.set_span(10.0, 40.0)
    assert controller.conditions().temperature_c == pytest.approx(ROOM_C, abs=6 * NOISE_K)

    controller.set_temperature(30.0)
    controller.set_output(True)
    wait(at, 0.3)

    seen = controller.conditions()
    assert seen.is_on
    assert seen.temperature_c == pytest.approx(30.0, abs=6 * NOISE_K)
    assert seen.temperature_c == pytest.approx(SENSOR.temperature_c(seen.resistance_ohm), abs=1e-9)


def test_regulating_ends_and_the_plant_goes_back_to_the_room(
    plant: tuple[Place, ScpiTemperatureController],
) -> None:
    at, controller = plant
    controller.set_span(10.0, 40.0)
    controller.set_temperature(30.0)
    controller.set_output(True)
    wait(at, 0.3)

    assert controller.set_output(False) is False

    wait(at, 0.3)
    assert controller.conditions().temperature_c == pytest.approx(ROOM_C, abs=6 * NOISE_K)


def test_spans_may_follow_each_other_in_any_order(plant: tuple[Place, ScpiTemperatureController]) -> None:
    _, controller = plant

    for low_c, high_c in ((50.0, 70.0), (10.0, 20.0), (30.0, 60.0), (5.0, 80.0)):
        controller.set_span(low_c, high_c)
        settings = controller.settings()
        assert (settings["lowest_c"], settings["highest_c"]) == (low_c, high_c)


def test_a_setpoint_beyond_the_span_is_refused(plant: tuple[Place, ScpiTemperatureController]) -> None:
    _, controller = plant
    controller.set_span(10.0, 40.0)

    with pytest.raises(RefusedError) as caught:
        controller.set_temperature(45.0)

    assert caught.value.code == -222


@pytest.mark.parametrize("sensor", [SENSOR, Beta(10e3, 25.0, 3976.0), Beta(100e3, 20.0, 4250.0)])
def test_the_constants_of_the_rig_file_are_those_on_the_instrument_afterwards(
    transport: Transport, sensor: Beta
) -> None:
    with place(transport, CONTROLLER.driver, controller_twin(sensor=sensor)) as at:
        controller = controller_at(at, thermistor=sensor)
        controller.set_span(10.0, 40.0)

        assert controller.settings()["thermistor"] == str(sensor)
        assert controller.conditions().temperature_c == pytest.approx(ROOM_C, abs=6 * NOISE_K)


def test_an_instrument_that_forgets_the_constants_is_found_out(
    plant: tuple[Place, ScpiTemperatureController],
) -> None:
    at, _ = plant
    controller = controller_at(at, thermistor=Beta(12e3, 25.0, 3976.0))
    controller.set_span(10.0, 40.0)
    at.link.write(b"*RST\n")

    with pytest.raises(InstrumentError, match="where its sensor's constants give"):
        controller.conditions()


def test_a_sensor_of_another_resistance_than_the_rig_file_says_is_no_temperature(transport: Transport) -> None:
    with place(transport, CONTROLLER.driver, controller_twin(sensor=Beta(1e6, 25.0, 3976.0))) as at:
        controller = controller_at(at)

        with pytest.raises(InstrumentError, match="not the one of the rig file"):
            controller.set_span(10.0, 40.0)


def test_without_constants_the_instrument_s_own_are_left_as_they_are(
    plant: tuple[Place, ScpiTemperatureController],
) -> None:
    at, _ = plant
    controller = controller_at(at, thermistor=None)
    controller.set_span(10.0, 40.0)

    assert controller.settings()["thermistor"] == "as set on the instrument"
    assert controller.conditions().temperature_c == pytest.approx(ROOM_C, abs=6 * NOISE_K)


def test_a_sensor_that_breaks_is_a_fault_and_regulating_can_still_be_ended() -> None:
    with place("loopback", CONTROLLER.driver, controller_twin(sensor_breaks_at_s=10.0)) as at:
        controller = controller_at(at)
        controller.set_span(10.0, 40.0)
        controller.set_temperature(30.0)
        controller.set_output(True)
        at.timeline.wait_until(11.0)

        with pytest.raises(InstrumentError, match="the sensor reads inf ohm"):
            controller.conditions()
        with pytest.raises(InstrumentError, match="the sensor reads inf ohm"):
            controller.set_output(True)
        assert controller.set_output(False) is False


def test_channels_of_one_rack_work_side_by_side_on_one_link(rack: Place) -> None:
    source, tec = source_at(rack), controller_at(rack, channel=2)
    shutter = ScpiSwitch(rack.link, with_defaults(dict(DRIVERS["scpi-switch"].driver.options), channel=SHUTTER))
    carrier = ScpiSlide(rack.link, with_defaults(dict(DRIVERS["scpi-slide"].driver.options), channel=SLIDE))

    identities = {instrument.identify().model for instrument in (source, tec, shutter, carrier)}
    tec.set_span(10.0, 40.0)
    tec.set_temperature(25.0)
    tec.set_output(True)
    source.set_current(0.02)
    source.set_output(True)
    wait(rack, 0.3)

    assert identities == {"simulated rack"}
    assert rack.wait_for(shutter.begin_set(True)) is True
    assert source.conditions().current_a == pytest.approx(0.02, abs=1e-6)
    assert tec.conditions().temperature_c == pytest.approx(25.0, abs=6 * NOISE_K)
    assert source.set_output(False) is False
    assert tec.conditions().is_on
    assert carrier.is_in()


@pytest.mark.parametrize("channel", [2, 3])
def test_a_channel_of_the_rack_that_is_no_source_is_the_wrong_instrument(channel: int) -> None:
    options = with_defaults(dict(current_source.DRIVER.options), channel=channel)
    with place("loopback", SOURCE.driver, rack_twin()) as at:
        source = ScpiCurrentSource(at.link, options)

        with pytest.raises(WrongInstrumentError, match="no current source"):
            source.identify()


@pytest.mark.parametrize("channel", [1, 3])
def test_a_channel_of_the_rack_that_is_no_controller_is_the_wrong_instrument(channel: int) -> None:
    options = with_defaults(dict(temperature_controller.DRIVER.options), channel=channel)
    with place("loopback", CONTROLLER.driver, rack_twin()) as at:
        tec = ScpiTemperatureController(at.link, options)

        with pytest.raises(WrongInstrumentError, match="no temperature controller"):
            tec.identify()


def test_a_trip_of_the_source_is_not_taken_for_a_fault_of_the_controller_beside_it(rack: Place) -> None:
    source, tec = source_at(rack), controller_at(rack, channel=2)
    tec.set_span(10.0, 40.0)
    source.set_compliance(1.6)
    source.set_current(0.034)
    with pytest.raises(InstrumentError, match="tripped"):
        source.set_output(True)

    seen = tec.conditions()

    assert not seen.is_at_limit
    assert source.conditions().is_tripped
