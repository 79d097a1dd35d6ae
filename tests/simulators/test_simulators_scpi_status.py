"""Error queue and registers: IEEE 488.2, chapter 11, and SCPI-1999 volume 1, chapter 9."""

import pytest

from rigctl_sim.scpi.complaint import TEXTS
from rigctl_sim.scpi.status import QUEUE_LENGTH, Register, Status


def test_an_empty_queue_says_no_error() -> None:
    assert Status().next_error() == '0,"No error"'


def test_errors_come_out_in_the_order_they_went_in() -> None:
    status = Status()
    for code in (-113, -222, -230):
        status.complain(code)

    assert [status.next_error() for _ in range(4)] == [
        '-113,"Undefined header"',
        '-222,"Data out of range"',
        '-230,"Data corrupt or stale"',
        '0,"No error"',
    ]


def test_a_full_queue_keeps_the_oldest_and_ends_with_an_overflow() -> None:
    status = Status()
    for _ in range(QUEUE_LENGTH + 5):
        status.complain(-113)

    told = [status.next_error() for _ in range(QUEUE_LENGTH + 1)]

    assert told[:-2] == ['-113,"Undefined header"'] * (QUEUE_LENGTH - 1)
    assert told[-2:] == ['-350,"Queue overflow"', '0,"No error"']


@pytest.mark.parametrize(("code", "bit"), [(-113, 0x20), (-222, 0x10), (-350, 0x08), (-440, 0x04)])
def test_each_class_of_errors_has_its_bit(code: int, bit: int) -> None:
    status = Status(standard_event=0)

    status.complain(code)

    assert status.read_standard_event() == bit


def test_power_on_is_told_once() -> None:
    status = Status()

    assert [status.read_standard_event(), status.read_standard_event()] == [0x80, 0]


def test_every_code_has_a_text_without_quotes() -> None:
    assert all(text and '"' not in text for text in TEXTS.values())


def test_an_event_latches_when_its_condition_rises() -> None:
    register = Register()

    register.set_bit(8, True)
    register.set_bit(8, False)

    assert register.condition == 0
    assert [register.read_event(), register.read_event()] == [8, 0]


def test_a_condition_that_stays_raises_no_second_event() -> None:
    register = Register()
    register.set_bit(8, True)
    register.read_event()

    register.set_bit(8, True)

    assert register.read_event() == 0


def test_one_bit_leaves_the_others_alone() -> None:
    register = Register()
    register.set_bit(8, True)
    register.set_bit(16, True)

    register.set_bit(8, False)

    assert register.condition == 16


def test_a_bit_stays_set_while_any_channel_sets_it() -> None:
    register = Register()
    register.set_bit(8, True, channel=1)
    register.set_bit(8, True, channel=2)

    register.set_bit(8, False, channel=1)
    assert register.condition == 8
    register.set_bit(8, False, channel=2)
    assert register.condition == 0


def test_a_second_channel_raises_no_second_event() -> None:
    register = Register()
    register.set_bit(8, True, channel=1)
    register.read_event()

    register.set_bit(8, True, channel=2)

    assert register.read_event() == 0


def test_a_channel_that_never_set_a_bit_does_not_clear_it() -> None:
    register = Register()
    register.set_bit(8, True, channel=1)

    register.set_bit(8, False, channel=2)

    assert register.condition == 8


@pytest.mark.parametrize(("enable", "is_reported"), [(0, False), (8, True), (16, False), (24, True)])
def test_only_enabled_events_are_reported(enable: int, is_reported: bool) -> None:
    register = Register(event=8, enable=enable)

    assert register.is_reported is is_reported


def test_the_status_byte_is_zero_when_there_is_nothing_to_tell() -> None:
    assert Status(standard_event=0).byte(has_message=False) == 0


def test_the_status_byte_sums_everything_up() -> None:
    status = Status(standard_event=0)

    status.complain(-113)
    assert status.byte(has_message=False) == 0x04
    assert status.byte(has_message=True) == 0x14
    status.event_enable = 0x20
    assert status.byte(has_message=False) == 0x24
    status.questionable.event = status.questionable.enable = 8
    status.operation.event = status.operation.enable = 16
    assert status.byte(has_message=False) == 0xAC


def test_the_master_summary_follows_the_service_request_mask() -> None:
    status = Status(standard_event=0)
    status.complain(-113)

    status.service_enable = 0x04

    assert status.byte(has_message=False) == 0x44


def test_clearing_leaves_the_masks() -> None:
    status = Status(event_enable=0x20, service_enable=0x04)
    status.complain(-113)
    status.questionable.set_bit(8, True)
    status.questionable.enable = 8

    status.clear()

    assert (status.standard_event, status.questionable.event, len(status.errors)) == (0, 0, 0)
    assert (status.event_enable, status.service_enable, status.questionable.enable) == (0x20, 0x04, 8)
    assert status.questionable.condition == 8


def test_a_preset_clears_the_masks_of_the_device() -> None:
    status = Status(event_enable=0x20)
    status.operation.enable = status.questionable.enable = 0xFF

    status.preset()

    assert (status.operation.enable, status.questionable.enable, status.event_enable) == (0, 0, 0x20)
