"""The loopback in virtual time: reading moves the clock, and a late reply stays on the line."""

import pytest
from link_peers import CLOSE, ActingTwin, Pause, Wire, open_loopback_wire

from rigctl.errors import DisconnectedError, LinkTimeoutError, StopRequestedError
from rigctl.links.loopback import LoopbackChannel
from rigctl.timeline import VirtualTimeline


@pytest.fixture
def twin() -> ActingTwin:
    return ActingTwin()


@pytest.fixture
def channel(twin: ActingTwin, virtual: VirtualTimeline) -> LoopbackChannel:
    return LoopbackChannel("tcp://10.0.0.7:5025", twin, virtual)


def test_reading_moves_time_to_the_instant_at_which_the_reply_is_ready(
    channel: LoopbackChannel, twin: ActingTwin, virtual: VirtualTimeline
) -> None:
    twin.acts.append([Pause(2.5), b"1.5\n"])
    channel.write(b"READ?\n", 10.0)

    line = channel.readline(10.0)

    assert (line, virtual.now()) == (b"1.5\n", 2.5)


def test_writing_takes_no_time(channel: LoopbackChannel, virtual: VirtualTimeline) -> None:
    channel.write(b"READ?\n", 10.0)

    assert virtual.now() == 0.0


def test_a_reply_that_is_ready_at_the_deadline_itself_is_in_time(channel: LoopbackChannel, twin: ActingTwin) -> None:
    twin.acts.append([Pause(3.0), b"1.5\n"])
    channel.write(b"READ?\n", 3.0)

    assert channel.readline(3.0) == b"1.5\n"


def test_a_late_reply_moves_time_to_the_deadline_and_stays_on_the_line(
    channel: LoopbackChannel, twin: ActingTwin, virtual: VirtualTimeline
) -> None:
    twin.acts.append([Pause(3.5), b"1.5\n"])
    channel.write(b"READ?\n", 3.0)

    with pytest.raises(LinkTimeoutError):
        channel.readline(3.0)

    assert virtual.now() == 3.0
    assert channel.readline(9.0) == b"1.5\n"
    assert virtual.now() == 3.5


def test_the_beginning_of_a_late_line_is_told_and_kept(channel: LoopbackChannel, twin: ActingTwin) -> None:
    twin.acts.append([Pause(1.0), b"1.", Pause(5.0), b"5\n"])
    channel.write(b"READ?\n", 3.0)

    with pytest.raises(LinkTimeoutError) as caught:
        channel.readline(3.0)

    assert caught.value.partial == b"1."
    assert channel.readline(9.0) == b"1.5\n"


def test_without_any_reply_under_way_time_still_moves_to_the_deadline(
    channel: LoopbackChannel, virtual: VirtualTimeline
) -> None:
    with pytest.raises(LinkTimeoutError):
        channel.readline(3.0)

    assert virtual.now() == 3.0


def test_discarding_takes_what_is_here_and_never_reads_ahead(
    channel: LoopbackChannel, twin: ActingTwin, virtual: VirtualTimeline
) -> None:
    twin.acts.append([b"now\n", Pause(1.0), b"later\n"])
    channel.write(b"READ?\n", 9.0)

    assert channel.discard() == b"now\n"
    assert channel.discard() == b""
    assert virtual.now() == 0.0
    assert channel.readline(9.0) == b"later\n"


def test_exactly_the_bytes_asked_for_are_read(channel: LoopbackChannel, twin: ActingTwin) -> None:
    twin.acts.append([b"ab", Pause(1.0), b"cdef"])
    channel.write(b"READ?\n", 9.0)

    assert channel.read_exact(3, 9.0) == b"abc"
    assert channel.read_exact(3, 9.0) == b"def"


def test_closing_forgets_what_was_read_in_part_but_not_the_twin(channel: LoopbackChannel, twin: ActingTwin) -> None:
    twin.acts.append([b"old", Pause(1.0), b"new\n"])
    channel.write(b"READ?\n", 9.0)
    with pytest.raises(LinkTimeoutError):
        channel.readline(0.5)

    channel.close()

    assert channel.readline(9.0) == b"new\n"


def test_a_stop_request_ends_a_read(channel: LoopbackChannel, virtual: VirtualTimeline) -> None:
    virtual.stop.request("ctrl-c")

    with pytest.raises(StopRequestedError):
        channel.readline(3.0)

    assert virtual.now() == 0.0


def test_a_late_answer_costs_its_timeout_and_the_resync_its_remaining_delay(loopback_wire: Wire) -> None:
    loopback_wire.link.exchange(b"ECHO? hello\n")
    loopback_wire.twin.acts.append([Pause(5.0), b"stale\n"])

    with pytest.raises(LinkTimeoutError):
        loopback_wire.link.exchange(b"READ?\n", timeout_s=1.0)

    assert loopback_wire.timeline.now() == 5.0
    assert loopback_wire.link.exchange(b"ECHO? next\n") == (b"next",)


def test_the_same_exchanges_take_the_same_time_again() -> None:
    instants = []
    for _ in range(2):
        with open_loopback_wire() as wire:
            wire.twin.acts.extend([[Pause(0.1), b"1\n"], [Pause(0.7), b"2\n"]])
            wire.link.exchange(b"READ?\n")
            wire.link.exchange(b"READ?\n")
            instants.append(wire.timeline.now())

    assert instants == [pytest.approx(0.8)] * 2


def test_a_connection_that_ends_right_after_an_answer_leaves_no_step_to_trust(loopback_wire: Wire) -> None:
    loopback_wire.twin.acts.append([b"1.5\n", CLOSE])

    answer = loopback_wire.link.exchange(b"READ?\n")

    assert answer == (b"1.5",)
    assert not loopback_wire.link.is_in_step


def test_an_interrupt_into_a_lost_connection_is_told(loopback_wire: Wire) -> None:
    loopback_wire.twin.acts.append([CLOSE])
    with pytest.raises(DisconnectedError):
        loopback_wire.link.exchange(b"READ?\n")

    with pytest.raises(DisconnectedError, match="has not been opened again"):
        loopback_wire.link.interrupt(b"!")
