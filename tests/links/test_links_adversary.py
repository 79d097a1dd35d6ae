"""A peer that does its worst, drawn at random: what a link returns is the answer to what was just asked.

Every question carries a number of its own and the true answer echoes it, so a stale, torn or doubled reply
can be told from the answer. The peer may delay, cut, double, truncate or swallow its replies; a copy follows
its original at once.
"""

import itertools
from collections.abc import Callable
from contextlib import AbstractContextManager

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from link_peers import (
    Act,
    Pause,
    Piece,
    Wire,
    open_hislip_wire,
    open_loopback_wire,
    open_serial_wire,
    open_tcp_wire,
)

from rigctl.errors import FramingError, LinkTimeoutError

TIMEOUT_S = 1.0

cuts = st.lists(st.integers(min_value=0, max_value=12), max_size=4)
delays_s = st.lists(st.sampled_from([0.0, 0.0, 0.01, 0.4, 0.9, 1.5, 3.0]), min_size=5, max_size=5)


def cut_up(reply: bytes, at: list[int], pauses_s: list[float]) -> list[Piece]:
    """The reply in pieces, each after a pause."""
    edges = [0, *sorted(min(edge, len(reply)) for edge in at), len(reply)]
    pieces: list[Piece] = []
    for (begin, end), pause_s in zip(itertools.pairwise(edges), pauses_s, strict=False):
        pieces += [Pause(pause_s), reply[begin:end]]
    return pieces


@st.composite
def misdeeds(draw: st.DrawFn, number: int) -> Act:
    """What the peer does about question `number`."""
    answer = b"A%d" % number
    deed = draw(st.sampled_from(["answer", "double", "truncate", "swallow", "drop terminator"]))
    if deed == "swallow":
        return []
    reply = {
        "answer": answer + b"\n",
        "double": (answer + b"\n") * 2,
        "truncate": answer[: draw(st.integers(min_value=0, max_value=len(answer)))],
        "drop terminator": answer,
    }[deed]
    if deed == "double":
        pauses_s = [draw(st.sampled_from([0.0, 0.5, 3.0])), 0.0, 0.0, 0.0, 0.0]
        return cut_up(reply, [], pauses_s)
    return cut_up(reply, draw(cuts), draw(delays_s))


def ask(wire: Wire, number: int) -> bytes | None:
    try:
        (answer,) = wire.link.exchange(b"Q%d?\n" % number, timeout_s=TIMEOUT_S)
    except (LinkTimeoutError, FramingError):
        return None
    return answer


@given(st.data())
@settings(max_examples=300, deadline=None)
def test_whatever_the_peer_does_an_answer_belongs_to_its_question(data: st.DataObject) -> None:
    with open_loopback_wire() as wire:
        for number in range(100, 100 + data.draw(st.integers(min_value=1, max_value=12), label="questions")):
            wire.twin.acts.clear()
            wire.twin.acts.append(data.draw(misdeeds(number)))

            answer = ask(wire, number)

            assert answer in (None, b"A%d" % number)
            wire.timeline.wait_until(wire.timeline.now() + data.draw(st.sampled_from([0.0, 0.2, 5.0])))


@given(st.data())
@settings(max_examples=300, deadline=None)
def test_a_peer_that_behaves_is_never_refused_however_it_cuts_its_answers(data: st.DataObject) -> None:
    with open_loopback_wire() as wire:
        for number in range(100, 106):
            reply = b"A%d\r\n" % number
            wire.twin.acts.append(cut_up(reply, data.draw(cuts), [0.1] * 5))

            assert ask(wire, number) == b"A%d" % number


@pytest.mark.parametrize("open_wire", [open_tcp_wire, open_serial_wire, open_hislip_wire])
@given(data=st.data())
@settings(max_examples=12, deadline=None)
def test_over_a_real_wire_torn_and_doubled_answers_stay_with_their_questions(
    open_wire: Callable[[], AbstractContextManager[Wire]], data: st.DataObject
) -> None:
    with open_wire() as wire:
        for number in range(100, 106):
            copies = data.draw(st.integers(min_value=1, max_value=3))
            pauses_s = data.draw(st.lists(st.sampled_from([0.0, 0.001]), min_size=5, max_size=5))
            reply = (b"A%d\n" % number) * copies
            at = data.draw(cuts) if copies == 1 else []
            wire.twin.acts.append(cut_up(reply, at, pauses_s))

            assert ask(wire, number) in (None, b"A%d" % number)
