"""The plain contact's bytes on the wire."""

import pytest
from scpi_script import NO_ERROR, QUEUE
from scripted_twin import Bench, with_defaults

from rigctl.errors import RefusedError, WrongInstrumentError
from rigctl.interfaces import SwitchCapabilities
from rigctl_drivers.relay import DRIVER, ScpiRelay

END = b";:SYSTEM:ERROR:NEXT?\n"
OK = b';0,"No error"\n'
STATE = b"ROUTE:CLOSE? (@7)" + END


def make_relay(bench: Bench, **options: object) -> ScpiRelay:
    return ScpiRelay(bench.link, with_defaults(dict(DRIVER.options), **{"channel": 7, **options}))


@pytest.mark.parametrize(
    ("is_closed", "command", "state"),
    [(True, b"ROUTE:CLOSE (@7)", b"1"), (False, b"ROUTE:OPEN (@7)", b"0")],
)
def test_the_contact_is_closed_and_opened_as_asked(scpi: Bench, is_closed: bool, command: bytes, state: bytes) -> None:
    scpi.twin.expect(command + b";:" + STATE, state + OK)
    scpi.twin.expect(STATE, state + OK)

    begun = make_relay(scpi).begin_set(is_closed)

    assert begun.due_s == pytest.approx(10e-3)
    assert begun.poll() is is_closed


@pytest.mark.parametrize(("state", "is_closed"), [(b"1", True), (b"0", False)])
def test_the_state_is_read_back(scpi: Bench, state: bytes, is_closed: bool) -> None:
    scpi.twin.expect(STATE, state + OK)

    assert make_relay(scpi).is_closed() is is_closed


def test_a_contact_that_sticks_is_refused_with_both_states(scpi: Bench) -> None:
    scpi.twin.expect(b"ROUTE:OPEN (@7);:" + STATE, b"1" + OK)

    with pytest.raises(RefusedError, match=r"relay \(@7\) was set to open but reads back closed"):
        make_relay(scpi).begin_set(False)


def test_an_instrument_without_relays_is_the_wrong_one(scpi: Bench) -> None:
    scpi.twin.expect(b"*CLS;*IDN?\n", b"ACME,source,0,1\n")
    scpi.twin.expect(STATE, b'-113,"Undefined header"\n')
    scpi.twin.expect(QUEUE, NO_ERROR)

    with pytest.raises(WrongInstrumentError, match="no switch"):
        make_relay(scpi).identify()


@pytest.mark.parametrize(("state", "word"), [(b"1", "closed"), (b"0", "open")])
def test_settings_tell_the_state(scpi: Bench, state: bytes, word: str) -> None:
    scpi.twin.expect(STATE, state + OK)

    assert make_relay(scpi).settings() == {"contact": word}


def test_capabilities_follow_the_rig_file() -> None:
    options = with_defaults(dict(DRIVER.options), moves_in=0.2)

    assert DRIVER.capabilities(options) == SwitchCapabilities(moves_in_s=0.2)
