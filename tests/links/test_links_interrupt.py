"""Bytes that must not wait, and what was thrown away: for conventions that act and speak out of turn."""

from datetime import UTC, datetime

import pytest
from link_peers import CLOSE, ActingTwin, NonceFamily

from rigctl.errors import DisconnectedError
from rigctl.links.link import LONGEST_DISCARDED_BYTES, Link
from rigctl.links.loopback import LoopbackChannel
from rigctl.timeline import VirtualTimeline


def linked(twin: ActingTwin) -> Link:
    timeline = VirtualTimeline(datetime(2026, 3, 1, tzinfo=UTC))
    return Link("tcp://x:1", lambda: LoopbackChannel("tcp://x:1", twin, timeline), NonceFamily(), timeline)


def test_an_interrupt_is_the_first_thing_sent_though_the_link_is_out_of_step() -> None:
    twin = ActingTwin()
    link = linked(twin)

    link.interrupt(b"!\n")

    assert twin.heard == [b"!"]
    assert not link.is_in_step


def test_an_interrupt_leaves_a_link_in_step_that_was() -> None:
    twin = ActingTwin()
    link = linked(twin)
    link.exchange(b"ECHO? 1\n")
    twin.heard.clear()

    link.interrupt(b"!\n")

    assert link.exchange(b"ECHO? 2\n") == (b"2",)
    assert twin.heard == [b"!", b"ECHO? 2"]


def test_an_interrupt_of_a_lost_connection_says_so() -> None:
    link = linked(ActingTwin([CLOSE]))
    with pytest.raises(DisconnectedError):
        link.exchange(b"X?\n")

    with pytest.raises(DisconnectedError, match="lost"):
        link.interrupt(b"!\n")


def test_what_was_said_unasked_can_be_looked_at_once() -> None:
    twin = ActingTwin()
    link = linked(twin)
    link.exchange(b"ECHO? 1\n")
    link.take_discarded()
    twin.receive(b"ECHO? ALARM:1\n", link.timeline.now())

    link.exchange(b"ECHO? 2\n")

    assert link.take_discarded().strip() == b"ALARM:1"
    assert link.take_discarded() == b""


def test_what_was_said_unasked_is_kept_up_to_a_bound() -> None:
    twin = ActingTwin()
    link = linked(twin)
    link.exchange(b"ECHO? 1\n")
    for number in range(3):
        twin.receive(b"ECHO? " + str(number).encode() * LONGEST_DISCARDED_BYTES + b"\n", link.timeline.now())
        link.exchange(b"ECHO? 2\n")

    assert len(link.take_discarded()) <= LONGEST_DISCARDED_BYTES
