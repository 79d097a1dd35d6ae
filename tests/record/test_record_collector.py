import gc

import pytest

from rigctl.record.collector import collector_at_rest


def test_no_cycle_is_collected_within_and_the_collector_goes_on_afterwards() -> None:
    with collector_at_rest():
        assert not gc.isenabled()

    assert gc.isenabled()


def test_the_collector_goes_on_after_an_error() -> None:
    with pytest.raises(KeyError), collector_at_rest():
        raise KeyError

    assert gc.isenabled()


def test_a_collector_that_was_off_stays_off() -> None:
    gc.disable()
    try:
        with collector_at_rest():
            pass

        assert not gc.isenabled()
    finally:
        gc.enable()
