"""Cutting bytes into lines and pieces, whole, byte by byte and in random chunks."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from rigctl.errors import FramingError
from rigctl.links.inbox import LONGEST_LINE_BYTES, Inbox


def lines_of(chunks: list[bytes]) -> list[bytes]:
    inbox, lines = Inbox("tcp://h:1"), []
    for chunk in chunks:
        inbox.add(chunk)
        while (line := inbox.take_line()) is not None:
            lines.append(line)
    return lines


STREAM = b'1.5\n\n-2\r\n0,"No error"\n'
LINES = [b"1.5\n", b"\n", b"-2\r\n", b'0,"No error"\n']


def test_a_stream_is_cut_after_each_line_feed() -> None:
    assert lines_of([STREAM]) == LINES


def test_a_stream_byte_by_byte_gives_the_same_lines() -> None:
    assert lines_of([STREAM[i : i + 1] for i in range(len(STREAM))]) == LINES


def test_what_follows_the_last_line_feed_waits() -> None:
    inbox = Inbox("tcp://h:1")
    inbox.add(b"1.5\nrest")

    inbox.take_line()

    assert inbox.take_line() is None
    assert inbox.take_all() == b"rest"
    assert inbox.take_all() == b""


@given(st.lists(st.binary(max_size=12)))
def test_however_it_is_chunked_nothing_is_lost_and_no_line_holds_two(chunks: list[bytes]) -> None:
    whole = b"".join(chunks)

    lines = lines_of(chunks)

    assert b"".join(lines) == whole[: whole.rfind(b"\n") + 1]
    assert all(line.count(b"\n") == 1 and line.endswith(b"\n") for line in lines)


@given(st.binary(min_size=1, max_size=40), st.data())
def test_pieces_and_lines_can_be_mixed(content: bytes, data: st.DataObject) -> None:
    inbox = Inbox("tcp://h:1")
    inbox.add(b"#2%02d" % len(content) + content + b"\n")

    head = inbox.take_exact(2)
    size = inbox.take_exact(2)

    assert (head, size) == (b"#2", b"%02d" % len(content))
    assert inbox.take_exact(len(content) + 2) is None
    assert inbox.take_exact(len(content)) == content
    assert inbox.take_line() == b"\n"


def test_a_line_feed_before_an_earlier_search_is_found_after_a_piece_was_cut() -> None:
    inbox = Inbox("tcp://h:1")
    inbox.add(b"abcdef")
    assert inbox.take_line() is None
    inbox.take_exact(4)

    inbox.add(b"\n")

    assert inbox.take_line() == b"ef\n"


@pytest.mark.parametrize(("at_most", "taken"), [(0, b""), (3, b"1.5"), (9, b"1.5\n")])
def test_some_of_what_is_here_is_taken_without_waiting_for_more(at_most: int, taken: bytes) -> None:
    inbox = Inbox("tcp://h:1")
    inbox.add(b"1.5\n")

    assert inbox.take_some(at_most) == taken
    assert inbox.take_all() == b"1.5\n"[len(taken) :]


def test_looking_takes_nothing_away() -> None:
    inbox = Inbox("tcp://h:1")
    inbox.add(b"abc")

    assert (inbox.peek(), inbox.peek()) == (b"abc", b"abc")


def test_a_line_may_be_long_but_not_endless() -> None:
    inbox = Inbox("tcp://h:1")
    inbox.add(b"x" * LONGEST_LINE_BYTES)
    assert inbox.take_line() is None

    inbox.add(b"x")

    with pytest.raises(FramingError, match="without an end of line"):
        inbox.take_line()


def test_being_late_tells_the_last_bytes_and_leaves_them() -> None:
    inbox = Inbox("tcp://h:1")
    inbox.add(b"y" * 100 + b"end")

    late = inbox.late()

    assert late.partial == b"y" * 100 + b"end"
    assert "yend" in str(late)
    assert len(str(late).splitlines()[0]) < 160
    assert inbox.peek() == late.partial
