"""The journal: framing, and what is left of it after a crash."""

import json
import math
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from rigctl.errors import RecordError
from rigctl.record.journal import Journal, frame, journal_path, parse_journal

RECORDS = [{"kind": "event", "t": i / 3.0, "text": f"β {i}", "level": "info"} for i in range(12)]


def framed(records: list[dict[str, Any]]) -> tuple[bytes, list[int]]:
    """Lines of a journal, and the length after each."""
    data, crc, ends = b"", 0, []
    for record in records:
        line, crc = frame(record, crc)
        data += line
        ends.append(len(data))
    return data, ends


TAILS: dict[str, Callable[[bytes, int], bytes]] = {
    "nothing": lambda data, cut: b"",
    "zeros": lambda data, cut: bytes(4096),
    "garbage": lambda data, cut: bytes((i * 89 + cut * 31) % 256 for i in range(300)),
    "line feeds": lambda data, cut: b"\n" * 50,
    "stale lines of the same run": lambda data, cut: data[: len(data) // 2],
    "stale lines of another run": lambda data, cut: framed([{"kind": "event", "t": 9.0}] * 3)[0],
}


@pytest.mark.parametrize("tail", TAILS)
def test_cut_at_every_length_with_any_tail_all_that_was_acknowledged_comes_back_and_nothing_foreign(
    tail: str,
) -> None:
    data, ends = framed(RECORDS)

    # from 1: at 0 another run's lines are that run's own journal, whose UUID tells
    for cut in range(1, len(data) + 1):
        whole = sum(end <= cut for end in ends)
        content = parse_journal(data[:cut] + TAILS[tail](data, cut))

        # a tail may happen to complete the line that was cut: that is a record of this run
        assert len(content.records) >= whole, cut
        assert content.records == tuple(RECORDS[: len(content.records)]), cut


def test_the_next_lines_of_an_older_copy_do_not_continue_a_journal() -> None:
    data, ends = framed(RECORDS)
    other, other_ends = framed([{**record, "text": "older"} for record in RECORDS])

    content = parse_journal(data[: ends[4]] + other[other_ends[4] :])

    assert content.records == tuple(RECORDS[:5])


def test_a_flipped_bit_anywhere_ends_the_prefix_at_the_line_before() -> None:
    data, ends = framed(RECORDS[:4])

    for place in range(len(data)):
        damaged = bytearray(data)
        damaged[place] ^= 0x10
        whole = sum(end <= place for end in ends)

        assert parse_journal(bytes(damaged)).records == tuple(RECORDS[:whole]), place


def test_what_follows_the_prefix_is_handed_out_as_the_tail() -> None:
    data, ends = framed(RECORDS[:2])

    content = parse_journal(data[: ends[0] + 7])

    assert content.tail == data[ends[0] : ends[0] + 7]


def test_a_line_is_readable_by_a_person_and_by_any_json_parser() -> None:
    line, _ = frame({"kind": "event", "text": "45 °"}, 0)

    crc, length, text = line.split(b" ", 2)

    assert len(crc) == 8
    assert int(length) == len(text) - 1
    assert json.loads(text) == {"kind": "event", "text": "45 °"}


@given(st.floats(allow_nan=False, allow_infinity=False))
def test_a_number_keeps_every_bit(value: float) -> None:
    content = parse_journal(frame({"kind": "event", "t": value}, 0)[0])

    assert content.records[0]["t"].hex() == value.hex()


@given(st.text())
def test_any_text_comes_back_even_with_line_feeds_and_undecodable_bytes(text: str) -> None:
    text += "\n\udc80"

    content = parse_journal(frame({"kind": "event", "text": text}, 0)[0])

    assert content.records[0]["text"] == text


@pytest.mark.parametrize("value", [math.nan, math.inf, -math.inf])
def test_what_is_not_finite_becomes_null_at_any_depth(value: float) -> None:
    content = parse_journal(frame({"a": [1.0, (value,)], "b": {"c": value}, "d": "x"}, 0)[0])

    assert content.records[0] == {"a": [1.0, [None]], "b": {"c": None}, "d": "x"}


@given(st.binary(max_size=300))
def test_arbitrary_bytes_are_no_record(data: bytes) -> None:
    assert parse_journal(data).records == ()


def test_it_lies_beside_the_run_file() -> None:
    assert journal_path(Path("runs/a.h5")) == Path("runs/a.h5.journal")


def test_a_journal_that_exists_is_not_opened_again(tmp_path: Path) -> None:
    path = tmp_path / "a.h5.journal"
    path.write_bytes(b"something")

    with pytest.raises(RecordError, match="a journal lies there"):
        Journal(path, durable=True)

    assert path.read_bytes() == b"something"


def test_a_folder_that_does_not_exist_is_told(tmp_path: Path) -> None:
    with pytest.raises(RecordError, match="No such file or directory"):
        Journal(tmp_path / "nowhere" / "a.h5.journal", durable=True)


def test_its_content_is_what_was_acknowledged(tmp_path: Path) -> None:
    journal = Journal(tmp_path / "a.h5.journal", durable=False)
    for record in RECORDS:
        journal.append(record)

    content = journal.content()
    journal.close()

    assert content == framed(RECORDS)[0] == (tmp_path / "a.h5.journal").read_bytes()


def test_after_closing_it_accepts_nothing(tmp_path: Path) -> None:
    journal = Journal(tmp_path / "a.h5.journal", durable=False)
    journal.close()
    journal.close()

    with pytest.raises(RecordError, match="closed"):
        journal.append(RECORDS[0])
