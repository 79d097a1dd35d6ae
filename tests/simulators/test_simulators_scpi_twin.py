"""An SCPI instrument on its wire: lines, order, replies, common commands, and waiting."""

from collections.abc import Iterable

import pytest
from twin_wire import Wire, torn, whole

from rigctl_sim.scpi.complaint import Complaint
from rigctl_sim.scpi.status import Status
from rigctl_sim.scpi.syntax import Command, Wait
from rigctl_sim.scpi.twin import ANSWERS_IN_S, LONGEST_LINE, ScpiTwin

IDENTITY = "polrig,simulated clock,clock 1,0"
TAKES_S = 1.5


class Clock:
    """A device that tells the time, and is busy for a while after `BEGIN`."""

    def __init__(self) -> None:
        self.status = Status()
        self.ends_s = -1.0
        self.resets = 0

    def commands(self) -> Iterable[Command]:
        return (
            Command("TIME?", lambda at_s: f"{at_s:.3f}"),
            Command("BEGin", self.begin),
            Command("END?", lambda _: Wait(self.ends_s, lambda at_s: f"{at_s:.3f}")),
            Command("FAIL", self.fail),
            Command("FAIL?", self.fail),
        )

    def begin(self, at_s: float) -> None:
        self.ends_s = at_s + TAKES_S

    def fail(self, _at_s: float) -> None:
        raise Complaint(-230)

    def catch_up(self, now_s: float) -> None:
        """Nothing to finish."""

    def busy_until_s(self) -> float:
        return self.ends_s

    def reset(self, now_s: float) -> None:
        self.resets += 1
        self.ends_s = -1.0


@pytest.fixture
def device() -> Clock:
    return Clock()


@pytest.fixture
def twin(device: Clock) -> ScpiTwin:
    return ScpiTwin(device, identity=IDENTITY)


@pytest.fixture
def wire(twin: ScpiTwin) -> Wire:
    return Wire(twin)


def test_an_answer_takes_its_time(twin: ScpiTwin) -> None:
    twin.receive(b"TIME?\n", 1.0)

    assert twin.next_ready_s() == 1.0 + ANSWERS_IN_S
    assert twin.take(1.0) == b""
    assert twin.take(1.0 + ANSWERS_IN_S) == b"1.000\n"
    assert twin.next_ready_s() is None


def test_answers_of_one_message_share_a_line(wire: Wire) -> None:
    assert wire.ask(b"TIME?;*ESE?;:SYST:ERR?") == '0.000;0;0,"No error"'


def test_answers_of_two_messages_come_in_two_lines(wire: Wire) -> None:
    wire.send(b"*ESE?\n*SRE?\n")

    assert wire.gather() == b"0\n0\n"


def test_a_message_without_a_query_is_not_answered(wire: Wire) -> None:
    wire.send(b"*CLS;*ESE 1\n")

    assert wire.twin.next_ready_s() is None


def test_nothing_happens_before_the_line_ends(wire: Wire) -> None:
    wire.send(b"*ESE 5;*ESE?")
    assert wire.twin.next_ready_s() is None

    wire.send(b"\n")

    assert wire.gather() == b"5\n"


@pytest.mark.parametrize(
    "data",
    [
        b"*IDN?\n",
        b"TIME?;*ESE?\n*ESE 7;*ESE?\r\n\n*STB?\n",
        b"FOO\nSYST:ERR?;ERR?\n",
        b"BEGIN;END?\nTIME?\n",
        b"\xff\xfe\nSYST:ERR?\n",
    ],
)
def test_torn_bytes_give_the_same_answers_as_whole_ones(data: bytes) -> None:
    answers = [way(ScpiTwin(Clock(), identity=IDENTITY), data, at_s=2.0) for way in (whole, torn)]

    assert answers[0] == answers[1]
    assert answers[0].endswith(b"\n")


def test_a_failing_query_adds_nothing_to_the_answer(wire: Wire) -> None:
    assert wire.ask(b"*ESE?;FAIL?;*SRE?;:SYST:ERR?") == '0;0;-230,"Data corrupt or stale"'


def test_a_header_nobody_knows_leaves_the_rest_unanswered(wire: Wire) -> None:
    wire.send(b"NOBODY?;*ESE?\n")
    assert wire.gather() == b""

    assert wire.ask(b"SYST:ERR?") == '-113,"Undefined header"'


def test_what_stood_before_an_unknown_header_was_done_and_is_answered(wire: Wire) -> None:
    assert wire.ask(b"*ESE 9;*ESE?;NOBODY?") == "9"


def test_the_identity_must_be_the_last_query_of_its_message(wire: Wire) -> None:
    """IEEE 488.2, 10.14.3."""
    assert wire.ask(b"*IDN?;*ESE?") == IDENTITY
    assert wire.ask(b"SYST:ERR?") == '-440,"Query UNTERMINATED after indefinite response"'


def test_a_command_may_follow_the_identity(wire: Wire) -> None:
    assert wire.ask(b"*CLS;*IDN?;*ESE 4") == IDENTITY
    assert wire.ask(b"*ESE?;:SYST:ERR?") == '4;0,"No error"'


def test_a_line_too_long_overruns_the_buffer(wire: Wire) -> None:
    wire.send(b"*ESE 1;" * 1000)
    wire.send(b"*ESE?\n")

    assert wire.gather() == b""
    assert wire.ask(b"SYST:ERR?;:SYST:ERR:COUN?") == '-363,"Input buffer overrun";0'


def test_bytes_without_an_end_do_not_pile_up(wire: Wire) -> None:
    for _ in range(100):
        wire.send(b"x" * 1000)

    assert len(wire.twin._arriving) <= 2 * LONGEST_LINE + 1000  # type: ignore[attr-defined]  # the one way to see it


# waiting


def test_a_query_that_waits_holds_the_whole_answer_back(twin: ScpiTwin) -> None:
    twin.receive(b"BEGIN;*ESE?;:END?;:TIME?\n", 1.0)

    ready_s = twin.next_ready_s()

    assert ready_s == 1.0 + TAKES_S + ANSWERS_IN_S
    assert twin.take(ready_s - 1e-6) == b""
    assert twin.take(ready_s) == b"0;2.500;2.500\n"


def test_lines_behind_one_that_waits_wait_too(wire: Wire) -> None:
    wire.send(b"BEGIN;END?\n", at_s=1.0)
    wire.send(b"TIME?\n", at_s=1.1)

    assert wire.gather() == b"2.500\n2.500\n"


def test_a_wait_that_is_over_is_none(wire: Wire) -> None:
    wire.send(b"BEGIN\n", at_s=1.0)

    assert wire.ask(b"END?", at_s=5.0) == "5.000"


def test_operation_complete_is_answered_when_it_is(wire: Wire) -> None:
    """IEEE 488.2, 10.19."""
    wire.send(b"BEGIN;*OPC?;TIME?\n", at_s=1.0)

    assert wire.gather() == b"1;2.500\n"


def test_operation_complete_is_1_at_once_when_nothing_is_under_way(wire: Wire) -> None:
    assert wire.ask(b"*OPC?;TIME?") == "1;0.000"


def test_wait_holds_what_comes_after_it(wire: Wire) -> None:
    """IEEE 488.2, 10.39."""
    wire.send(b"BEGIN;TIME?;*WAI;TIME?\n", at_s=1.0)

    assert wire.gather() == b"1.000;2.500\n"


def test_operation_complete_sets_its_event_bit_when_it_is(wire: Wire) -> None:
    """IEEE 488.2, 10.18."""
    wire.send(b"*CLS;BEGIN;*OPC\n", at_s=1.0)

    assert wire.ask(b"*ESR?", at_s=2.0) == "0"
    assert wire.ask(b"*ESR?", at_s=2.6) == "1"
    assert wire.ask(b"*ESR?", at_s=2.7) == "0"


@pytest.mark.parametrize("cancel", [b"*CLS", b"*RST"])
def test_clearing_and_resetting_cancel_the_wish_for_operation_complete(wire: Wire, cancel: bytes) -> None:
    wire.send(b"*CLS;BEGIN;*OPC\n" + cancel + b"\n", at_s=1.0)

    assert wire.ask(b"*ESR?", at_s=9.0) == "0"


def test_a_reset_reaches_the_device_but_not_the_status(wire: Wire, device: Clock) -> None:
    wire.send(b"*ESE 3;FAIL;*RST\n")

    assert device.resets == 1
    assert wire.ask(b"*ESE?;:SYST:ERR:COUN?") == "3;1"


# common commands and status


def test_the_self_test_passes(wire: Wire) -> None:
    assert wire.ask(b"*TST?") == "0"


def test_the_version_of_the_standard_is_told(wire: Wire) -> None:
    assert wire.ask(b"SYST:VERS?") == "1999.0"


def test_the_first_reading_of_the_event_register_tells_of_power_on(wire: Wire) -> None:
    assert [wire.ask(b"*ESR?"), wire.ask(b"*ESR?")] == ["128", "0"]


def test_the_service_request_mask_has_no_bit_6(wire: Wire) -> None:
    """IEEE 488.2, 10.34."""
    assert wire.ask(b"*SRE 255;*SRE?") == "191"


@pytest.mark.parametrize("mask", [b"256", b"-1"])
def test_a_mask_out_of_range_is_refused(wire: Wire, mask: bytes) -> None:
    assert wire.ask(b"*ESE " + mask + b";*ESE?;:SYST:ERR?") == '0;-222,"Data out of range"'


def test_the_status_byte_shows_that_an_answer_is_waiting(wire: Wire) -> None:
    assert wire.ask(b"*CLS;*STB?") == "0"
    assert wire.ask(b"*ESE?;*STB?") == "0;16"


def test_the_status_byte_shows_the_error_queue(wire: Wire) -> None:
    assert wire.ask(b"FAIL;*STB?") == "4"


@pytest.mark.parametrize("name", [b"OPER", b"QUES"])
def test_the_registers_of_the_device_can_be_enabled_and_preset(wire: Wire, name: bytes) -> None:
    head = b"STAT:" + name

    assert wire.ask(head + b":ENAB 24;ENAB?") == "24"
    assert wire.ask(b"STAT:PRES;" + b":" + head + b":ENAB?;COND?;EVEN?") == "0;0;0"


def test_a_resync_by_two_numbers_finds_the_step(wire: Wire) -> None:
    """Two replies unread and half a command on the line: nothing but the two numbers follows one another."""
    wire.send(b"*ESE?\nTIME?\nTIM")

    wire.send(b"\n*ESE 77;*ESE?\n*ESE 201;*ESE?\n*ESE 0\n")

    assert wire.gather().decode().split() == ["0", "0.000", "77", "201"]
    assert wire.ask(b"SYST:ERR?") == '-113,"Undefined header"'
