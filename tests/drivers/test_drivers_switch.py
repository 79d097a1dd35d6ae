"""The switch's bytes on the wire, and which state of its relay lets the light through."""

import pytest
from scpi_script import NO_ERROR, QUEUE
from scripted_twin import Bench, with_defaults

from rigctl.errors import FramingError, RefusedError, WrongInstrumentError
from rigctl.interfaces import ShutterCapabilities
from rigctl_drivers.switch import DRIVER, ScpiSwitch

END = b";:SYSTEM:ERROR:NEXT?\n"
OK = b';0,"No error"\n'
STATE = b"ROUTE:CLOSE? (@3)" + END


def make_switch(bench: Bench, **options: object) -> ScpiSwitch:
    return ScpiSwitch(bench.link, with_defaults(dict(DRIVER.options), **{"channel": 3, **options}))


@pytest.mark.parametrize(
    ("at_rest", "is_open", "command", "relay"),
    [
        ("closed", True, b"ROUTE:CLOSE (@3)", b"1"),
        ("closed", False, b"ROUTE:OPEN (@3)", b"0"),
        ("open", True, b"ROUTE:OPEN (@3)", b"0"),
        ("open", False, b"ROUTE:CLOSE (@3)", b"1"),
    ],
)
def test_the_relay_is_driven_as_the_shutter_at_rest_asks(
    scpi: Bench, at_rest: str, is_open: bool, command: bytes, relay: bytes
) -> None:
    scpi.twin.expect(command + b";:" + STATE, relay + OK)
    scpi.twin.expect(STATE, relay + OK)

    begun = make_switch(scpi, at_rest=at_rest).begin_set(is_open)

    assert begun.due_s == pytest.approx(20e-3)
    assert begun.poll() is is_open


@pytest.mark.parametrize(
    ("at_rest", "relay", "is_open"),
    [("closed", b"1", True), ("closed", b"0", False), ("open", b"1", False), ("open", b"0", True)],
)
def test_the_state_is_read_from_the_relay(scpi: Bench, at_rest: str, relay: bytes, is_open: bool) -> None:
    scpi.twin.expect(STATE, relay + OK)

    assert make_switch(scpi, at_rest=at_rest).is_open() is is_open


def test_a_relay_that_stays_where_it_was_is_refused_with_both_states(scpi: Bench) -> None:
    scpi.twin.expect(b"ROUTE:OPEN (@3);:" + STATE, b"1" + OK)

    with pytest.raises(RefusedError, match=r"relay \(@3\) was set to open but reads back closed"):
        make_switch(scpi).begin_set(False)


def test_a_relay_that_moves_later_by_itself_is_told_by_the_poll(scpi: Bench) -> None:
    scpi.twin.expect(b"ROUTE:OPEN (@3);:" + STATE, b"0" + OK)
    scpi.twin.expect(STATE, b"1" + OK)

    assert make_switch(scpi).begin_set(False).poll() is True


def test_a_channel_that_the_unit_does_not_have_is_refused_with_its_reason(scpi: Bench) -> None:
    scpi.twin.expect(b"ROUTE:CLOSE (@99);:ROUTE:CLOSE? (@99)" + END, b'-222,"Data out of range"\n')
    scpi.twin.expect(QUEUE, b'-222,"Data out of range"\n')
    scpi.twin.expect(QUEUE, NO_ERROR)

    with pytest.raises(RefusedError) as caught:
        make_switch(scpi, channel=99).begin_set(True)

    assert caught.value.code == -222


@pytest.mark.parametrize("answer", [b"2" + OK, b"ON" + OK, b"1,0" + OK, b"1;1" + OK, b"1\n"])
def test_a_state_that_is_none_is_refused(scpi: Bench, answer: bytes) -> None:
    scpi.twin.expect(STATE, answer)

    with pytest.raises(FramingError):
        make_switch(scpi).is_open()

    assert not scpi.link.is_in_step


def test_identify_asks_for_the_relay_of_the_shutter(scpi: Bench) -> None:
    scpi.twin.expect(b"*CLS;*IDN?\n", b"polrig,simulated switch,relays,1.0\n")
    scpi.twin.expect(STATE, b"0" + OK)

    assert make_switch(scpi).identify().model == "simulated switch"


def test_a_power_meter_in_the_switch_s_place_is_the_wrong_instrument(scpi: Bench) -> None:
    scpi.twin.expect(b"*CLS;*IDN?\n", b"polrig,simulated power meter,head 7,1.0\n")
    scpi.twin.expect(STATE, b'-113,"Undefined header"\n')
    scpi.twin.expect(QUEUE, NO_ERROR)

    with pytest.raises(WrongInstrumentError, match="no switch"):
        make_switch(scpi).identify()


def test_settings_tell_the_state_and_the_wiring(scpi: Bench) -> None:
    scpi.twin.expect(STATE, b"1" + OK)

    assert make_switch(scpi).settings() == {"shutter": "open", "at rest": "closed"}


def test_capabilities_follow_the_rig_file() -> None:
    options = with_defaults(dict(DRIVER.options), moves_in=0.5)

    assert DRIVER.capabilities(options) == ShutterCapabilities(moves_in_s=0.5)
