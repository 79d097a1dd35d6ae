"""How a G-code controller is brought back into step."""

import pytest
from scripted_twin import ADDRESS, Bench, make_bench

from rigctl.errors import FramingError, LinkTimeoutError, RefusedError
from rigctl_drivers.gcode_codec import is_ack_line
from rigctl_drivers.gcode_family import GCODE, MOST_STALE_LINES, GcodeFamily

IDLE = b"<Idle|MPos:0.000>\r\n"


def expect_resync(bench: Bench, *, first: bytes = IDLE, clear: bytes = b"ok\r\n", last: bytes = IDLE) -> None:
    bench.twin.expect(b"?", first)
    bench.twin.expect(b"\n", clear)
    bench.twin.expect(b"?", last)


def test_a_family_is_a_value() -> None:
    assert GcodeFamily() == GCODE
    assert hash(GcodeFamily()) == hash(GCODE)


def test_a_link_that_was_just_opened_resyncs_before_its_first_line() -> None:
    bench = make_bench(GCODE, is_in_step=False)
    expect_resync(bench)
    bench.twin.expect(b"$X\n", b"ok\r\n")

    assert bench.link.exchange(b"$X\n", is_last=is_ack_line) == (b"ok",)
    bench.twin.assert_done()


@pytest.mark.parametrize(
    "stale",
    [
        b"ok\r\n",
        b"ok\r\nok\r\nok\r\n",
        b"[MSG:Caution: Unlocked]\r\n",
        b"\r\nfirmware 1.1 ['$' for help]\r\n",
        b"MPos:0.000>\r\n",
        b"\xff\xfe\r\n",
    ],
)
def test_everything_before_the_report_is_stale_and_kept(gcode: Bench, stale: bytes) -> None:
    expect_resync(gcode, first=stale + IDLE)

    assert b"".join(gcode.link.resync().stale) == stale
    assert gcode.link.is_in_step


def test_what_is_already_here_is_stale_too(gcode: Bench) -> None:
    gcode.twin.say(b"ok\r\n")
    expect_resync(gcode)

    assert gcode.link.resync().stale == (b"ok\r\n",)


@pytest.mark.parametrize("refused", [b"error:20\r\n", b"[MSG:x]\r\nerror:20\r\n"])
def test_a_half_sent_line_is_ended_by_one_empty_line_and_its_refusal_cleared_by_the_next(
    gcode: Bench, refused: bytes
) -> None:
    gcode.twin.expect(b"?", IDLE)
    gcode.twin.expect(b"\n", refused)
    gcode.twin.expect(b"\n", b"ok\r\n")
    gcode.twin.expect(b"?", IDLE)

    assert gcode.link.resync().complaints == ((20, "an unsupported command"),)


def test_a_refusal_among_the_stale_lines_is_told(gcode: Bench) -> None:
    expect_resync(gcode, first=b"error:2\r\n" + IDLE)

    assert gcode.link.resync().complaints == ((2, "a bad number"),)


def test_an_alarm_among_the_stale_lines_is_told_as_one(gcode: Bench) -> None:
    expect_resync(gcode, first=b"ALARM:1\r\n[MSG:Reset to continue]\r\n<Alarm|MPos:0.000>\r\n")

    assert gcode.link.resync().complaints == ((1, "ALARM: alarm 1: a hard limit was hit; the position is lost"),)


def test_an_acknowledgement_too_many_makes_it_ask_for_another_report(gcode: Bench) -> None:
    expect_resync(gcode, last=b"ok\r\n" + IDLE)
    gcode.twin.expect(b"?", IDLE)

    assert gcode.link.resync().stale == (b"ok\r\n",)


def test_a_controller_that_searches_its_zero_is_left_alone_at_once(gcode: Bench) -> None:
    gcode.twin.expect(b"?", b"<Home|MPos:0.000>\r\n")

    with pytest.raises(LinkTimeoutError, match="searching its zero"):
        gcode.link.resync()

    assert gcode.timeline.now() == 0.0
    assert not gcode.link.is_in_step


@pytest.mark.parametrize("answered", [b"", b"<Idle|MPos:0.0", b"ok\r\nok\r\n"])
def test_a_controller_that_does_not_report_times_out_with_what_it_said(gcode: Bench, answered: bytes) -> None:
    gcode.twin.expect(b"?", answered)

    with pytest.raises(LinkTimeoutError, match="does not come into step") as caught:
        gcode.link.resync()

    assert caught.value.partial == answered
    assert caught.value.address == ADDRESS
    assert gcode.timeline.now() == GCODE.longest_s


def test_a_controller_that_sends_lines_without_end_is_given_up(gcode: Bench) -> None:
    gcode.twin.expect(b"?", b"ok\r\n" * (MOST_STALE_LINES + 1))

    with pytest.raises(FramingError, match="lines without end"):
        gcode.link.resync()


def test_a_line_that_times_out_is_explained_by_what_came_meanwhile(gcode: Bench) -> None:
    gcode.twin.expect(b"G0 Q1\n", b"error:20\r\n", after_s=GCODE.reply_timeout_s + 0.1)
    gcode.twin.expect(b"?", IDLE, after_s=0.2)
    gcode.twin.expect(b"\n", b"ok\r\n")
    gcode.twin.expect(b"?", IDLE)

    with pytest.raises(RefusedError) as caught:
        gcode.link.exchange(b"G0 Q1\n", is_last=is_ack_line)

    assert (caught.value.code, caught.value.text) == (20, "an unsupported command")
