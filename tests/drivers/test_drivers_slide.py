"""The slide's bytes on the wire, and which state of its relay has the element in the beam."""

import pytest
from scpi_script import NO_ERROR, QUEUE
from scripted_twin import Bench, with_defaults

from rigctl.errors import FramingError, RefusedError, WrongInstrumentError
from rigctl.interfaces import SwitchCapabilities
from rigctl_drivers.slide import DRIVER, ScpiSlide

END = b";:SYSTEM:ERROR:NEXT?\n"
OK = b';0,"No error"\n'
STATE = b"ROUTE:CLOSE? (@4)" + END


def make_slide(bench: Bench, **options: object) -> ScpiSlide:
    return ScpiSlide(bench.link, with_defaults(dict(DRIVER.options), **{"channel": 4, **options}))


@pytest.mark.parametrize(
    ("at_rest", "is_in", "command", "relay"),
    [
        ("in", True, b"ROUTE:OPEN (@4)", b"0"),
        ("in", False, b"ROUTE:CLOSE (@4)", b"1"),
        ("out", True, b"ROUTE:CLOSE (@4)", b"1"),
        ("out", False, b"ROUTE:OPEN (@4)", b"0"),
    ],
)
def test_the_relay_is_driven_as_the_slide_at_rest_asks(
    scpi: Bench, at_rest: str, is_in: bool, command: bytes, relay: bytes
) -> None:
    scpi.twin.expect(command + b";:" + STATE, relay + OK)
    scpi.twin.expect(STATE, relay + OK)

    begun = make_slide(scpi, at_rest=at_rest).begin_set(is_in)

    assert begun.due_s == pytest.approx(0.5)
    assert begun.give_up_s > begun.due_s
    assert begun.poll() is is_in


@pytest.mark.parametrize(
    ("at_rest", "relay", "is_in"),
    [("in", b"0", True), ("in", b"1", False), ("out", b"0", False), ("out", b"1", True)],
)
def test_where_the_element_is_is_read_from_the_relay(scpi: Bench, at_rest: str, relay: bytes, is_in: bool) -> None:
    scpi.twin.expect(STATE, relay + OK)

    assert make_slide(scpi, at_rest=at_rest).is_in() is is_in


def test_a_slide_without_a_word_in_the_rig_file_rests_in_the_beam() -> None:
    assert DRIVER.options["at rest"].default == "in"


def test_a_relay_that_stays_where_it_was_is_refused_with_both_states(scpi: Bench) -> None:
    scpi.twin.expect(b"ROUTE:CLOSE (@4);:" + STATE, b"0" + OK)

    with pytest.raises(RefusedError, match=r"relay \(@4\) was set to closed but reads back open"):
        make_slide(scpi).begin_set(False)


def test_a_state_that_is_none_is_refused(scpi: Bench) -> None:
    scpi.twin.expect(STATE, b"IN" + OK)

    with pytest.raises(FramingError):
        make_slide(scpi).is_in()

    assert not scpi.link.is_in_step


def test_an_instrument_without_relays_is_the_wrong_one(scpi: Bench) -> None:
    scpi.twin.expect(b"*CLS;*IDN?\n", b"polrig,simulated power meter,head 7,1.0\n")
    scpi.twin.expect(STATE, b'-113,"Undefined header"\n')
    scpi.twin.expect(QUEUE, NO_ERROR)

    with pytest.raises(WrongInstrumentError, match="no switch"):
        make_slide(scpi).identify()


def test_settings_tell_where_the_element_is_and_the_wiring(scpi: Bench) -> None:
    scpi.twin.expect(STATE, b"1" + OK)

    assert make_slide(scpi).settings() == {"element": "out", "at rest": "in"}


def test_capabilities_follow_the_rig_file() -> None:
    options = with_defaults(dict(DRIVER.options), moves_in=1.5)

    assert DRIVER.capabilities(options) == SwitchCapabilities(moves_in_s=1.5)
