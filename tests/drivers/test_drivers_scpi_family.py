"""How an SCPI instrument is brought back into step."""

import pytest
from hypothesis import given
from hypothesis import strategies as st
from scpi_script import NO_ERROR, QUEUE, expect_first_number, expect_resync
from scripted_twin import ADDRESS, Bench, make_bench

from rigctl.errors import FramingError, LinkTimeoutError, RefusedError
from rigctl_drivers.scpi_family import MOST_COMPLAINTS, MOST_STALE_LINES, SCPI, ScpiFamily, nonces


@given(deadline_s=st.floats(0.0, 1e9))
def test_the_two_numbers_of_a_resync_differ_and_fit_the_register(deadline_s: float) -> None:
    first, second = nonces(deadline_s)

    assert first != second
    assert {first, second} <= set(range(1, 256))


def test_the_numbers_of_resyncs_at_different_instants_are_spread() -> None:
    assert len({nonces(0.001 * tick) for tick in range(200)}) > 190


def test_a_family_is_a_value() -> None:
    assert ScpiFamily() == SCPI
    assert hash(ScpiFamily()) == hash(SCPI)


def test_a_link_that_was_just_opened_resyncs_before_its_first_question() -> None:
    bench = make_bench(SCPI, is_in_step=False)
    expect_resync(bench)
    bench.twin.expect(QUEUE, NO_ERROR)
    bench.twin.expect(b"*OPC?\n", b"1\n")

    assert bench.link.exchange(b"*OPC?\n") == (b"1",)


@pytest.mark.parametrize(
    "stale",
    [
        b"1.0E-03\n",
        b"67E-03\n",
        b"0\n0\n1\n",
        b'0,"No error"\n' * 3,
        b"\xff\xfe\n",
        b"\n",
        b"9" * 5000 + b"\n",
    ],
)
def test_everything_before_the_two_numbers_is_stale_and_kept(scpi: Bench, stale: bytes) -> None:
    expect_resync(scpi, before=stale)
    scpi.twin.expect(QUEUE, NO_ERROR)

    assert b"".join(scpi.link.resync().stale) == stale


def test_the_first_number_alone_among_stale_lines_does_not_count(scpi: Bench) -> None:
    first, _ = nonces(SCPI.longest_s)
    expect_resync(scpi, before=f"{first}\n3\n".encode())
    scpi.twin.expect(QUEUE, NO_ERROR)

    assert scpi.link.resync().stale == (f"{first}\n".encode(), b"3\n")


def test_a_stale_line_that_equals_the_first_number_does_not_count_for_it(scpi: Bench) -> None:
    first, second = nonces(SCPI.longest_s)
    scpi.twin.expect(f"\n*ESE {first};*ESE?\n".encode(), f"{first}\n".encode())
    scpi.twin.expect(f"*ESE {second};*ESE?\n".encode(), f"{first}\n{second}\n".encode())
    scpi.twin.expect(b"*ESE 0\n")
    scpi.twin.expect(QUEUE, NO_ERROR)

    assert scpi.link.resync().stale == (f"{first}\n".encode(),)


def test_the_second_number_is_asked_for_once_the_first_has_come(scpi: Bench) -> None:
    expect_first_number(scpi, after_s=SCPI.longest_s + 1.0)

    with pytest.raises(LinkTimeoutError):
        scpi.link.resync()


def test_numbers_that_come_late_and_in_drops_are_waited_for(scpi: Bench) -> None:
    first, second = nonces(SCPI.longest_s)
    late = f"67E-03\n{first}\r\n".encode()
    scpi.twin.expect(f"\n*ESE {first};*ESE?\n".encode(), late, after_s=8.0, drips_s=0.05)
    scpi.twin.expect(f"*ESE {second};*ESE?\n".encode(), f"{second}\r\n".encode(), drips_s=0.05)
    scpi.twin.expect(b"*ESE 0\n")
    scpi.twin.expect(QUEUE, NO_ERROR, drips_s=0.01)

    assert scpi.link.resync().stale == (b"67E-03\n",)
    assert scpi.timeline.now() == pytest.approx(8.0, abs=1.5)


def test_a_reply_whose_end_was_lost_runs_into_the_numbers_and_costs_that_resync_only(scpi: Bench) -> None:
    expect_first_number(scpi, before=b"1.0")
    expect_resync(scpi, now_s=SCPI.longest_s)
    scpi.twin.expect(QUEUE, NO_ERROR)
    with pytest.raises(LinkTimeoutError):
        scpi.link.resync()

    assert scpi.link.resync().stale == ()


def test_the_error_queue_is_emptied_into_the_complaints_oldest_first(scpi: Bench) -> None:
    expect_resync(scpi)
    scpi.twin.expect(QUEUE, b'-113,"Undefined header"\n', drips_s=0.001)
    scpi.twin.expect(QUEUE, b'-222,"Data out of range"\n')
    scpi.twin.expect(QUEUE, NO_ERROR)

    complaints = scpi.link.resync().complaints

    assert complaints == ((-113, "Undefined header"), (-222, "Data out of range"))


@pytest.mark.parametrize("own", [b'-410,"Query INTERRUPTED"\n', b'-440,"x"\n', b'-102,"Syntax error"\n'])
def test_what_the_resync_itself_causes_is_left_out_of_the_complaints(scpi: Bench, own: bytes) -> None:
    expect_resync(scpi)
    scpi.twin.expect(QUEUE, own)
    scpi.twin.expect(QUEUE, b'-230,"Data corrupt or stale"\n')
    scpi.twin.expect(QUEUE, NO_ERROR)

    assert scpi.link.resync().complaints == ((-230, "Data corrupt or stale"),)


def test_an_error_queue_that_never_empties_does_not_hold_the_resync(scpi: Bench) -> None:
    expect_resync(scpi)
    for _ in range(MOST_COMPLAINTS):
        scpi.twin.expect(QUEUE, b'-350,"Queue overflow"\n')

    assert len(scpi.link.resync().complaints) == MOST_COMPLAINTS


def test_an_instrument_that_says_nothing_times_out_at_the_longest_operation(scpi: Bench) -> None:
    first, _ = nonces(SCPI.longest_s)
    scpi.twin.expect(f"\n*ESE {first};*ESE?\n".encode(), b"0.5\n67E")

    with pytest.raises(LinkTimeoutError, match="not even to") as caught:
        scpi.link.resync()

    assert caught.value.partial == b"0.5\n67E"
    assert caught.value.address == ADDRESS
    assert scpi.timeline.now() == SCPI.longest_s
    assert not scpi.link.is_in_step


def test_an_instrument_that_sends_lines_without_end_is_given_up(scpi: Bench) -> None:
    expect_first_number(scpi, before=b"1\n" * (MOST_STALE_LINES + 1))

    with pytest.raises(FramingError, match="lines without end"):
        scpi.link.resync()


def test_a_question_that_times_out_is_explained_by_the_error_queue(scpi: Bench) -> None:
    scpi.twin.expect(b"FOO?\n")
    expect_resync(scpi, now_s=SCPI.reply_timeout_s)
    scpi.twin.expect(QUEUE, b'-113,"Undefined header;FOO?"\n')
    scpi.twin.expect(QUEUE, NO_ERROR)

    with pytest.raises(RefusedError) as caught:
        scpi.link.exchange(b"FOO?\n")

    assert (caught.value.code, caught.value.text) == (-113, "Undefined header;FOO?")


def test_a_late_reply_is_never_the_answer_to_the_next_question(scpi: Bench) -> None:
    scpi.twin.expect(b"SLOW?\n", b"0.5\n", after_s=3.0)
    expect_resync(scpi, now_s=SCPI.reply_timeout_s, after_s=1.0)
    scpi.twin.expect(QUEUE, NO_ERROR)
    scpi.twin.expect(b"FAST?\n", b"7\n")
    with pytest.raises(LinkTimeoutError):
        scpi.link.exchange(b"SLOW?\n")

    assert scpi.link.exchange(b"FAST?\n") == (b"7",)
