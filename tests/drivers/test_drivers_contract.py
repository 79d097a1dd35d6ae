"""Every driver against the twin of its kind: in virtual time, and over every kind of wire in real time."""

import itertools
import statistics
from collections.abc import Iterator
from importlib.metadata import entry_points

import pytest
from scripted_twin import with_defaults
from twin_places import Place, Transport, place
from twin_table import DRIVERS, LIGHT_W, meter_twin, mount_twin, switch_twin

from rigctl.errors import (
    LinkError,
    MotionError,
    RefusedError,
    StopRequestedError,
    WrongInstrumentError,
)
from rigctl.interfaces import Flag, Instrument
from rigctl_drivers import gcode, power_meter, relay, slide, switch
from rigctl_drivers.gcode import AT_START, CLOCKWISE, GcodeRotary
from rigctl_drivers.power_meter import ScpiPowerMeter
from rigctl_drivers.relay import ScpiRelay
from rigctl_drivers.slide import ScpiSlide
from rigctl_drivers.switch import ScpiSwitch

SCPI_KINDS = ("scpi-current-source", "scpi-power-meter", "scpi-switch", "scpi-temperature-controller")
"""Drivers whose instruments differ; slides and relays are of the unit that switches shutters too."""


@pytest.fixture(params=list(DRIVERS))
def name(request: pytest.FixtureRequest) -> str:
    return str(request.param)


@pytest.fixture
def opened(transport: Transport, name: str) -> Iterator[tuple[Place, Instrument]]:
    entry = DRIVERS[name]
    with place(transport, entry.driver, entry.make_twin()) as at:
        yield at, at.open(entry.driver, entry.options)


def mount_at(at: Place, **options: object) -> GcodeRotary:
    return GcodeRotary(at.link, {**DRIVERS["gcode-rotary"].options, **options})


@pytest.fixture
def mount_place(transport: Transport) -> Iterator[Place]:
    with place(transport, gcode.DRIVER, mount_twin()) as at:
        yield at


@pytest.fixture
def meter(transport: Transport) -> Iterator[tuple[Place, ScpiPowerMeter]]:
    entry = DRIVERS["scpi-power-meter"]
    with place(transport, entry.driver, entry.make_twin()) as at:
        yield at, ScpiPowerMeter(at.link, entry.options)


def test_every_driver_that_is_installed_is_under_contract() -> None:
    assert set(DRIVERS) == {point.name for point in entry_points(group="rigctl.drivers")}


def test_the_driver_bears_its_name_and_is_found_by_it(name: str) -> None:
    assert DRIVERS[name].driver.name == name
    assert DRIVERS[name].driver.meaning


def test_a_twin_says_that_it_is_simulated(opened: tuple[Place, Instrument]) -> None:
    _, instrument = opened

    assert instrument.identify().is_simulated


def test_settings_are_words_and_numbers(opened: tuple[Place, Instrument]) -> None:
    _, instrument = opened

    settings = instrument.settings()

    assert settings
    assert all(isinstance(value, str | float) for value in settings.values())


def test_a_link_that_lost_its_step_finds_it_again_before_the_next_question(
    opened: tuple[Place, Instrument],
) -> None:
    at, instrument = opened
    before = instrument.identify()
    at.link.write(b"half a comm")
    at.link.mark_out_of_step()

    assert instrument.identify() == before


def test_a_reply_that_nobody_took_is_never_the_answer_to_the_next_question(
    opened: tuple[Place, Instrument], name: str
) -> None:
    at, instrument = opened
    before = instrument.identify()
    at.link.write(b"?" if name == "gcode-rotary" else b"*OPC?\n")
    at.timeline.wait_until(at.timeline.now() + 0.05)

    assert instrument.identify() == before


def test_a_stop_request_ends_a_question_and_the_next_one_is_answered_right(
    opened: tuple[Place, Instrument],
) -> None:
    at, instrument = opened
    before = instrument.identify()
    at.timeline.stop.request("SIGINT")
    with pytest.raises(StopRequestedError):
        instrument.identify()

    with at.timeline.stop.masked():
        assert instrument.identify() == before


@pytest.mark.parametrize(("named", "standing"), list(itertools.permutations(SCPI_KINDS, 2)))
def test_another_instrument_of_the_family_is_the_wrong_one(named: str, standing: str) -> None:
    entry = DRIVERS[named]
    with place("loopback", entry.driver, DRIVERS[standing].make_twin()) as at:
        instrument = at.open(entry.driver, entry.options)
        with pytest.raises(WrongInstrumentError):
            instrument.identify()


@pytest.mark.parametrize(("named", "standing"), [("gcode-rotary", "scpi-switch"), ("scpi-switch", "gcode-rotary")])
def test_an_instrument_of_another_family_never_passes(named: str, standing: str) -> None:
    entry = DRIVERS[named]
    with place("loopback", entry.driver, DRIVERS[standing].make_twin()) as at:
        instrument = at.open(entry.driver, entry.options)
        with pytest.raises((LinkError, WrongInstrumentError)):
            instrument.identify()


@pytest.mark.parametrize("angle_deg", [45.0, 370.25, -725.125, 0.0])
@pytest.mark.parametrize("positive", [gcode.COUNTER_CLOCKWISE, CLOCKWISE])
def test_a_mount_arrives_at_any_turn_in_either_sense(mount_place: Place, angle_deg: float, positive: str) -> None:
    mount = mount_at(mount_place, positive=positive)

    assert mount_place.wait_for(mount.begin_move(angle_deg)) == angle_deg
    assert mount.angle_deg() == angle_deg


def test_two_axes_of_one_controller_move_without_disturbing_each_other(mount_place: Place) -> None:
    first, second = mount_at(mount_place), mount_at(mount_place, channel="B")

    begun = [first.begin_move(30.0), second.begin_move(-60.0)]

    assert [mount_place.wait_for(move) for move in begun] == [30.0, -60.0]
    assert first.angle_deg() == 30.0


def test_an_axis_that_the_controller_has_not_is_the_wrong_instrument(mount_place: Place) -> None:
    with pytest.raises(WrongInstrumentError, match="no axis C"):
        mount_at(mount_place, channel="C").identify()


def test_a_move_beyond_the_soft_limits_is_an_alarm_with_its_meaning(mount_place: Place) -> None:
    mount = mount_at(mount_place)

    with pytest.raises(MotionError, match="alarm 2: the target is beyond the soft limits"):
        mount.begin_move(5000.0)

    with pytest.raises(MotionError, match="alarm"):
        mount.begin_move(10.0)
    assert not mount.is_homed()


@pytest.mark.parametrize("transport", ["loopback"])
def test_a_move_is_there_at_the_first_poll_when_the_capabilities_are_true(mount_place: Place) -> None:
    begun = mount_at(mount_place).begin_move(90.0)
    mount_place.timeline.wait_until(begun.due_s)

    assert begun.poll() == 90.0


@pytest.mark.parametrize("transport", ["loopback"])
def test_a_stopped_mount_knows_its_place_and_goes_on(transport: Transport) -> None:
    with place(transport, gcode.DRIVER, mount_twin(20.0)) as at:
        mount = mount_at(at, speed=20.0, acceleration=200.0)
        mount.begin_move(90.0)
        at.timeline.wait_until(2.0)

        mount.stop()

        stopped_deg = mount.angle_deg()
        assert 38.0 < stopped_deg < 42.0
        at.timeline.wait_until(at.timeline.now() + 10.0)
        assert mount.angle_deg() == stopped_deg
        assert at.wait_for(mount.begin_move(90.0)) == 90.0


def test_a_mount_at_rest_may_be_stopped_again_and_again(mount_place: Place) -> None:
    mount = mount_at(mount_place)
    mount_place.wait_for(mount.begin_move(12.5))

    mount.stop()
    mount.stop()

    assert mount.angle_deg() == 12.5
    assert mount_place.wait_for(mount.begin_move(13.0)) == 13.0


@pytest.mark.parametrize("transport", ["loopback"])
def test_a_mount_that_is_homed_by_the_run_finds_its_zero(transport: Transport) -> None:
    with place(transport, gcode.DRIVER, mount_twin(20.0, left_at_deg=50.0)) as at:
        mount = mount_at(at, homing=AT_START)
        assert not mount.is_homed()

        assert at.wait_for(mount.begin_home()) == 0.0

        assert mount.is_homed()
        assert at.timeline.now() > 5.0
        assert at.wait_for(mount.begin_move(5.0)) == 5.0


@pytest.mark.parametrize("transport", ["loopback"])
def test_a_search_for_the_zero_can_be_stopped_and_the_place_is_lost_then(transport: Transport) -> None:
    with place(transport, gcode.DRIVER, mount_twin(20.0, left_at_deg=50.0)) as at:
        mount = mount_at(at, homing=AT_START)
        begun = mount.begin_home()
        at.timeline.wait_until(begun.due_s)
        assert begun.poll() is None

        mount.stop()

        assert not mount.is_homed()
        with pytest.raises(MotionError, match="alarm 6: homing failed"):
            mount.angle_deg()
        at.timeline.wait_until(at.timeline.now() + 1.0)  # it coasts after the reset
        assert at.wait_for(mount.begin_home()) == 0.0


def test_a_dwell_gives_the_light_with_its_range_and_times(meter: tuple[Place, ScpiPowerMeter]) -> None:
    at, head = meter
    head.set_wavelength(785.2e-9)
    assert head.set_range(LIGHT_W) == 2e-3
    head.set_dwell(4, 0.02)

    dwell = at.wait_for(head.begin_dwell())

    assert statistics.mean(dwell.levels_w) == pytest.approx(LIGHT_W, rel=1e-3)
    assert len(set(dwell.levels_w)) == 4
    assert (dwell.flags, dwell.range_w) == (Flag(0), 2e-3)
    assert dwell.ended_s - dwell.began_s == pytest.approx(0.08)


def test_a_range_that_is_too_small_overloads_every_reading(meter: tuple[Place, ScpiPowerMeter]) -> None:
    at, head = meter
    head.set_range(1e-5)
    head.set_dwell(3, 0.01)

    dwell = at.wait_for(head.begin_dwell())

    assert dwell.flags == Flag.OVERLOAD | Flag.QUESTIONABLE
    assert all(level != level for level in dwell.levels_w)
    assert dwell.range_w == 2e-5


def test_the_automatic_range_finds_the_light(meter: tuple[Place, ScpiPowerMeter]) -> None:
    at, head = meter
    head.set_range(None)
    head.set_dwell(2, 0.01)

    dwell = at.wait_for(head.begin_dwell())

    assert (dwell.flags, dwell.range_w) == (Flag(0), 2e-3)
    assert head.settings()["ranging"] == "automatic"


def test_dwells_may_follow_each_other_and_one_may_be_given_up(meter: tuple[Place, ScpiPowerMeter]) -> None:
    at, head = meter
    head.set_range(LIGHT_W)
    head.set_dwell(2, 0.01)
    head.begin_dwell()

    first, second = at.wait_for(head.begin_dwell()), at.wait_for(head.begin_dwell())

    assert second.began_s >= first.ended_s
    assert first.levels_w != second.levels_w


def test_a_range_between_two_ranges_of_the_head_is_refused_with_both_values(transport: Transport) -> None:
    options = with_defaults(dict(power_meter.DRIVER.options), ranges=(1e-3, 2e-2))
    with place(transport, power_meter.DRIVER, meter_twin()) as at:
        head = ScpiPowerMeter(at.link, options)
        with pytest.raises(RefusedError, match=r"set to 0\.001 but reads back 2\.0*E-03"):
            head.set_range(1e-4)


def test_a_wavelength_beyond_the_head_is_refused_and_leaves_no_error_behind(
    meter: tuple[Place, ScpiPowerMeter],
) -> None:
    _, head = meter
    with pytest.raises(RefusedError) as caught:
        head.set_wavelength(10.6e-6)

    assert caught.value.code == -222
    assert head.set_range(LIGHT_W) == 2e-3


def test_a_block_that_was_never_begun_is_stale(meter: tuple[Place, ScpiPowerMeter]) -> None:
    at, head = meter
    head.set_dwell(2, 0.01)
    begun = head.begin_dwell()
    at.wait_for(begun)
    head.set_range(LIGHT_W)  # a new setting makes what was measured stale

    with pytest.raises(RefusedError) as caught:
        begun.poll()

    assert caught.value.code == -230


@pytest.mark.parametrize("at_rest", ["closed", "open"])
def test_a_shutter_opens_and_closes_whatever_it_is_at_rest(transport: Transport, at_rest: str) -> None:
    options = with_defaults(dict(switch.DRIVER.options), channel=3, at_rest=at_rest)
    with place(transport, switch.DRIVER, switch_twin()) as at:
        shutter = ScpiSwitch(at.link, options)
        assert shutter.is_open() == (at_rest == "open")

        assert at.wait_for(shutter.begin_set(True)) is True
        assert at.wait_for(shutter.begin_set(False)) is False
        assert shutter.is_open() is False


def test_a_channel_that_the_unit_has_not_is_refused_with_its_reason(transport: Transport) -> None:
    options = with_defaults(dict(switch.DRIVER.options), channel=9)
    with place(transport, switch.DRIVER, switch_twin()) as at:
        shutter = ScpiSwitch(at.link, options)
        with pytest.raises(RefusedError) as caught:
            shutter.begin_set(True)

    assert caught.value.code == -222


@pytest.mark.parametrize("at_rest", ["in", "out"])
def test_a_slide_puts_its_element_in_and_out_whatever_it_is_at_rest(transport: Transport, at_rest: str) -> None:
    options = with_defaults(dict(slide.DRIVER.options), channel=4, at_rest=at_rest, moves_in=0.02)
    with place(transport, slide.DRIVER, switch_twin()) as at:
        carrier = ScpiSlide(at.link, options)
        assert carrier.is_in() == (at_rest == "in")

        assert at.wait_for(carrier.begin_set(False)) is False
        assert at.wait_for(carrier.begin_set(True)) is True
        assert carrier.is_in() is True


def test_a_relay_closes_and_opens_its_contact(transport: Transport) -> None:
    with place(transport, relay.DRIVER, switch_twin()) as at:
        contact = ScpiRelay(at.link, DRIVERS["scpi-relay"].options)
        assert contact.is_closed() is False

        assert at.wait_for(contact.begin_set(True)) is True
        assert at.wait_for(contact.begin_set(False)) is False
        assert contact.is_closed() is False
