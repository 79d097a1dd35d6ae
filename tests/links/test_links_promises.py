"""What every link promises, kept by each channel against the same misbehaving peer.

Where a test waits for a timeout the peer holds its bytes back until the client says more, so that no load on
the machine can turn the late into the early.
"""

import time

import pytest
from link_peers import CLOSE, DEAF, HOLD, Act, Complaint, Wire

from rigctl.errors import (
    DisconnectedError,
    FramingError,
    LinkError,
    LinkTimeoutError,
    RefusedError,
    StopRequestedError,
)
from rigctl.links.link import LONGEST_DISCARDED_BYTES

SHORT_S = 0.03


def echo(wire: Wire, word: str) -> str:
    (line,) = wire.link.exchange(f"ECHO? {word}\n".encode())
    return line.decode()


@pytest.fixture
def ready(wire: Wire) -> Wire:
    """A wire whose link has passed its first exchange."""
    assert echo(wire, "hello") == "hello"
    wire.twin.heard.clear()
    return wire


def test_an_answer_comes_back_without_its_terminator(wire: Wire) -> None:
    assert wire.link.exchange(b"ECHO? 1.5E-03\n") == (b"1.5E-03",)


def test_one_carriage_return_before_the_line_feed_is_taken_off(ready: Wire) -> None:
    ready.twin.acts.append([b"1.5\r\r\n"])

    assert ready.link.exchange(b"READ?\n") == (b"1.5\r",)


def test_a_link_resyncs_before_its_first_exchange(wire: Wire) -> None:
    echo(wire, "first")

    assert wire.twin.heard[0].startswith(b"*ESE ")
    assert wire.twin.heard[-1] == b"ECHO? first"


def test_a_link_in_step_sends_nothing_but_the_question(ready: Wire) -> None:
    echo(ready, "again")

    assert ready.twin.heard == [b"ECHO? again"]


def test_a_missing_terminator_raises_with_the_bytes_that_came(ready: Wire) -> None:
    ready.twin.acts.append([b"1.234"])

    with pytest.raises(LinkTimeoutError) as caught:
        ready.link.exchange(b"READ?\n", timeout_s=SHORT_S)

    assert caught.value.partial == b"1.234"
    assert caught.value.address == ready.address


def test_silence_raises_with_no_bytes(ready: Wire) -> None:
    ready.twin.acts.append([])

    with pytest.raises(LinkTimeoutError, match="nothing came") as caught:
        ready.link.exchange(b"READ?\n", timeout_s=SHORT_S)

    assert caught.value.partial == b""


@pytest.mark.parametrize(
    "act",
    [
        pytest.param([HOLD, b"STALE\n"], id="late"),
        pytest.param([b"1.2345", HOLD, b"67E-03\n"], id="torn"),
        pytest.param([b"1.2345"], id="missing terminator"),
        pytest.param([HOLD, b"STALE\nSTALE\n"], id="late and doubled"),
        pytest.param([HOLD, b"\n"], id="empty"),
        pytest.param([HOLD, b"12\n200\n"], id="late numbers that look like nonces"),
    ],
)
def test_after_a_timeout_the_old_reply_answers_no_later_question(ready: Wire, act: Act) -> None:
    ready.twin.acts.append(act)
    with pytest.raises(LinkTimeoutError):
        ready.link.exchange(b"READ?\n", timeout_s=SHORT_S)

    answers = [echo(ready, word) for word in ("one", "two", "three")]

    assert answers == ["one", "two", "three"]


def test_two_replies_to_one_question_are_refused_for_nothing_tells_them_apart(ready: Wire) -> None:
    ready.twin.acts.append([b"1.5\n1.5\n"])

    with pytest.raises(FramingError, match="more than one reply") as caught:
        ready.link.exchange(b"READ?\n")

    assert caught.value.partial == b"1.5\n1.5\n"
    assert echo(ready, "next") == "next"


def test_a_copy_that_lies_unread_before_the_next_question_does_not_answer_it(ready: Wire) -> None:
    ready.twin.acts.append([b"1.5\n", HOLD, b"1.5\n"])
    first = ready.link.exchange(b"READ?\n")
    ready.release()
    ready.twin.heard.clear()

    second = echo(ready, "next")

    assert (first, second) == ((b"1.5",), "next")
    assert ready.twin.heard[0].startswith(b"*ESE ")


def test_unread_bytes_without_an_end_make_the_link_resync_too(ready: Wire) -> None:
    ready.twin.acts.append([b"1.5\n", HOLD, b"junk"])
    ready.link.exchange(b"READ?\n")
    ready.release()

    assert echo(ready, "next") == "next"


def test_when_the_resync_fails_nothing_passes(ready: Wire) -> None:
    ready.family.longest_s = SHORT_S
    ready.twin.acts.append([b"1.2", DEAF])

    for _ in range(2):
        with pytest.raises(LinkTimeoutError):
            ready.link.exchange(b"READ?\n", timeout_s=SHORT_S)

    assert not ready.link.is_in_step
    assert ready.twin.heard.count(b"READ?") == 1


def test_when_the_resync_fails_the_timeout_itself_is_told_with_its_bytes(ready: Wire) -> None:
    ready.family.longest_s = SHORT_S
    ready.twin.acts.append([b"1.2", DEAF])

    with pytest.raises(LinkTimeoutError) as caught:
        ready.link.exchange(b"READ?\n", timeout_s=SHORT_S)

    assert caught.value.partial == b"1.2"


def test_a_refused_question_is_told_with_the_instruments_own_words(ready: Wire) -> None:
    ready.twin.acts.append([Complaint(-113, "Undefined header"), Complaint(-350, "Queue overflow")])

    with pytest.raises(RefusedError, match="Undefined header; then -350 Queue overflow") as caught:
        ready.link.exchange(b"REED?\n", timeout_s=SHORT_S)

    assert (caught.value.code, caught.value.text) == (-113, "Undefined header")
    assert isinstance(caught.value.__cause__, LinkTimeoutError)


def test_after_a_refusal_the_error_queue_is_empty_and_the_link_in_step(ready: Wire) -> None:
    ready.twin.acts.append([Complaint(-113, "Undefined header"), Complaint(-222, "Data out of range")])
    with pytest.raises(RefusedError):
        ready.link.exchange(b"REED?\n", timeout_s=SHORT_S)

    assert not ready.twin.errors
    assert ready.link.is_in_step
    assert echo(ready, "next") == "next"


def test_a_peer_that_closes_while_the_link_looks_for_its_step_is_told_as_disconnected(ready: Wire) -> None:
    ready.twin.acts.append([b"1.2", HOLD, CLOSE])

    with pytest.raises(DisconnectedError):
        ready.link.exchange(b"READ?\n", timeout_s=SHORT_S)


@pytest.mark.parametrize("act", [[CLOSE], [b"1.2", CLOSE]], ids=["at once", "in mid-reply"])
def test_a_closed_connection_is_told_at_once_not_as_a_timeout(ready: Wire, act: Act) -> None:
    ready.twin.acts.append(act)
    began, instant_s = time.monotonic(), ready.timeline.now()

    with pytest.raises(DisconnectedError):
        ready.link.exchange(b"READ?\n", timeout_s=60.0)

    assert time.monotonic() - began < 10.0
    assert ready.timeline.now() - instant_s < 10.0


def test_a_lost_connection_stays_lost_until_it_is_opened_again(ready: Wire) -> None:
    ready.twin.acts.append([CLOSE])
    with pytest.raises(DisconnectedError):
        ready.link.exchange(b"READ?\n")
    with pytest.raises(DisconnectedError, match="has not been opened again"):
        echo(ready, "too early")

    ready.link.open()

    assert echo(ready, "back") == "back"
    assert b"ECHO? too early" not in ready.twin.heard


# a serial port that is pulled out takes along what had come and was not read
@pytest.mark.parametrize("wire", ["tcp", "loopback", "hislip"], indirect=True)
def test_a_whole_answer_before_the_close_is_still_an_answer(ready: Wire) -> None:
    ready.twin.acts.append([b"1.5\n", CLOSE])
    answer = ready.link.exchange(b"READ?\n")
    with pytest.raises(DisconnectedError):
        echo(ready, "gone")

    assert answer == (b"1.5",)


def test_a_stop_request_keeps_the_question_from_being_sent(ready: Wire) -> None:
    ready.timeline.stop.request("ctrl-c")

    with pytest.raises(StopRequestedError, match="ctrl-c"):
        echo(ready, "never")

    assert ready.twin.heard == []
    assert not ready.link.is_in_step


def test_while_the_bench_is_made_safe_a_stop_request_hinders_no_exchange(ready: Wire) -> None:
    ready.timeline.stop.request("ctrl-c")

    with ready.timeline.stop.masked():
        assert echo(ready, "shutter closed") == "shutter closed"


def test_a_link_marked_out_of_step_resyncs(ready: Wire) -> None:
    ready.link.mark_out_of_step()

    echo(ready, "next")

    assert ready.twin.heard[0].startswith(b"*ESE ")


def test_a_write_is_heard_and_leaves_the_link_in_step(ready: Wire) -> None:
    ready.link.write(b"OUTP 0\n")

    assert echo(ready, "next") == "next"
    assert ready.twin.heard == [b"OUTP 0", b"ECHO? next"]


def test_lines_are_gathered_up_to_the_last_one(ready: Wire) -> None:
    ready.twin.acts.append([b"[VER:1.1]\r\n", b"[OPT:V]\r\nok\r\n"])

    lines = ready.link.exchange(b"$I?\n", is_last=lambda line: line == b"ok")

    assert lines == (b"[VER:1.1]", b"[OPT:V]", b"ok")


def test_a_last_line_that_never_comes_is_a_timeout(ready: Wire) -> None:
    ready.twin.acts.append([b"[VER:1.1]\n", b"[OPT"])

    with pytest.raises(LinkTimeoutError) as caught:
        ready.link.exchange(b"$I?\n", is_last=lambda line: line == b"ok", timeout_s=SHORT_S)

    assert caught.value.partial == b"[OPT"


def test_what_is_said_after_the_last_line_makes_the_next_exchange_resync(ready: Wire) -> None:
    ready.twin.acts.append([b"ok\n[MSG:lost]\n"])
    ready.link.exchange(b"$X?\n", is_last=lambda line: line == b"ok")

    assert echo(ready, "next") == "next"


@pytest.mark.parametrize("pieces", [[b"#15hello\n"], [b"#", b"15", b"hel", b"lo\r", b"\n"]])
def test_a_block_is_returned_whole_however_it_is_cut(ready: Wire, pieces: Act) -> None:
    ready.twin.acts.append(pieces)

    assert ready.link.exchange_block(b"CURVE?\n") == b"hello"


def test_a_line_feed_inside_a_block_does_not_end_it(ready: Wire) -> None:
    content = bytes(range(256)) * 4
    ready.twin.acts.append([b"#41024", content, b"\n"])

    assert ready.link.exchange_block(b"CURVE?\n") == content
    assert echo(ready, "next") == "next"


@pytest.mark.parametrize(
    ("reply", "why"),
    [
        (b"#0hello\n", "without a length"),
        (b"1.5E-3\n", "no block"),
        (b"#x5hello\n", "no block"),
        (b"#2x5hello\n", "no length"),
        (b"#9999999999\n", "no length"),
        (b"#13hello\n", "goes on after its end"),
        (b"#15hello\n1.5\n", "more than one reply"),
    ],
)
def test_what_is_no_block_is_a_framing_error_and_resynced(ready: Wire, reply: bytes, why: str) -> None:
    ready.twin.acts.append([reply])

    with pytest.raises(FramingError, match=why) as caught:
        ready.link.exchange_block(b"CURVE?\n")

    assert caught.value.partial
    assert not ready.link.is_in_step
    assert echo(ready, "next") == "next"


def test_a_block_that_is_too_short_is_a_timeout_with_its_beginning(ready: Wire) -> None:
    ready.twin.acts.append([b"#15hel"])

    with pytest.raises(LinkTimeoutError) as caught:
        ready.link.exchange_block(b"CURVE?\n", timeout_s=SHORT_S)

    assert caught.value.partial == b"hel"


def test_a_line_without_end_is_refused_before_it_fills_the_memory(ready: Wire) -> None:
    ready.twin.acts.append([b"x" * 2**20, b"x"])

    with pytest.raises(FramingError, match="without an end of line"):
        ready.link.exchange(b"READ?\n")

    assert echo(ready, "next") == "next"


def test_every_failure_of_a_link_is_one_of_our_own_and_says_what_to_do(ready: Wire) -> None:
    for act in ([b"1.2"], [b"1\n2\n"], [CLOSE]):
        ready.twin.acts.append(act)
        with pytest.raises(LinkError) as caught:
            ready.link.exchange(b"READ?\n", timeout_s=SHORT_S)
        assert str(caught.value).startswith(ready.address) or "twin" in str(caught.value)


def test_a_closed_link_opens_again_at_its_next_use_and_resyncs(ready: Wire) -> None:
    ready.link.close()
    ready.link.close()

    assert echo(ready, "again") == "again"
    assert ready.twin.heard[0].startswith(b"*ESE ")


def test_what_was_said_unasked_or_too_late_can_be_looked_at_once(ready: Wire) -> None:
    ready.twin.acts.append([b"1.5\n", HOLD, b"ALARM:1\n"])
    ready.link.exchange(b"READ?\n")
    ready.release()
    echo(ready, "next")

    assert b"ALARM:1" in ready.link.take_discarded()
    assert ready.link.take_discarded() == b""


def test_of_a_torrent_thrown_away_only_its_end_is_kept(ready: Wire) -> None:
    ready.twin.acts.append([b"1.5\n", HOLD, b"x" * 10_000 + b"\nALARM:1\n"])
    ready.link.exchange(b"READ?\n")
    ready.release()
    echo(ready, "next")

    discarded = ready.link.take_discarded()

    assert len(discarded) <= LONGEST_DISCARDED_BYTES
    assert b"ALARM:1" in discarded


def test_an_interrupt_is_sent_although_the_link_is_out_of_step(ready: Wire) -> None:
    ready.link.mark_out_of_step()

    ready.link.interrupt(b"!\n")

    assert not ready.link.is_in_step
    assert echo(ready, "next") == "next"
    assert ready.twin.heard[0] == b"!"


def test_an_interrupt_leaves_a_link_in_step_in_step(ready: Wire) -> None:
    ready.link.interrupt(b"!\n")

    echo(ready, "next")

    assert ready.twin.heard == [b"!", b"ECHO? next"]
