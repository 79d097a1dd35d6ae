"""Mistakes are gathered in the order of the file, once at each place, with the nearest valid word."""

import pytest
from files_cases import told

from rigctl.errors import FileError
from rigctl.files.mistakes import Mistakes, either, nearest_word, quoted


def test_mistakes_come_in_the_order_of_the_file() -> None:
    mistakes = Mistakes("f.yaml")
    mistakes.add((3, 1), "c", "third")
    mistakes.add((1, 9), "b", "second")
    mistakes.add((1, 2), "a", "first")

    assert told(mistakes.raise_if_any) == ["f.yaml:1:2: first", "f.yaml:1:9: second", "f.yaml:3:1: third"]


def test_a_place_has_one_mistake_since_later_ones_are_its_echo() -> None:
    mistakes = Mistakes("f.yaml")
    mistakes.add((1, 1), "a", "the cause")
    mistakes.add((1, 1), "a", "its echo")

    assert told(mistakes.raise_if_any) == ["f.yaml:1:1: the cause"]


def test_a_text_over_several_lines_is_told_on_one() -> None:
    mistakes = Mistakes("f.yaml")
    mistakes.add((1, 2), "k", "'5\n mW' is no quantity", nearest="5\nmW")

    assert told(mistakes.raise_if_any) == ["f.yaml:1:2: '5 mW' is no quantity; did you mean '5 mW'?"]


def test_several_things_may_be_missing_at_one_place() -> None:
    mistakes = Mistakes("f.yaml")
    mistakes.add((1, 1), "a", "a mistake")
    mistakes.add_missing((1, 1), "b", "b is missing")
    mistakes.add_missing((1, 1), "c", "c is missing", expected="a word")

    assert told(mistakes.raise_if_any) == [
        "f.yaml:1:1: a mistake",
        "f.yaml:1:1: b is missing",
        "f.yaml:1:1: c is missing; expected a word",
    ]


def test_without_mistakes_nothing_is_raised() -> None:
    mistakes = Mistakes("f.yaml")

    mistakes.raise_if_any()

    assert mistakes.is_empty


def test_what_is_wrong_with_the_whole_file_comes_after_what_was_found_in_it() -> None:
    mistakes = Mistakes("f.yaml")
    mistakes.add((2, 1), "a", "a mistake")

    assert told(lambda: mistakes.refuse("is no recipe")) == ["f.yaml:2:1: a mistake"]


def test_a_mistake_of_the_whole_file_has_no_place() -> None:
    with pytest.raises(FileError) as caught:
        Mistakes("f.yaml").refuse("is too large", expected="less")

    assert str(caught.value) == "f.yaml: is too large; expected less"
    assert caught.value.mistakes[0].line == 0


@pytest.mark.parametrize(
    ("word", "near"),
    [
        ("singal", "signal"),
        ("Signal", "signal"),
        ("signals", "signal"),
        ("part mout", "part mount"),
        ("part_mount", "part mount"),
        ("oven", ""),
        ("", ""),
        ("x" * 100_000, ""),
    ],
)
def test_the_nearest_word_is_found_or_none(word: str, near: str) -> None:
    assert nearest_word(word, ["signal", "part mount", "shutter"]) == near


@pytest.mark.parametrize(
    ("words", "text"),
    [
        (["a"], "a"),
        (["a", "b"], "a or b"),
        (["a", "b", "c"], "a, b or c"),
        ([str(i) for i in range(15)], "0, 1, 2, 3, 4, 5, 6, 7, 8, 9, 10, 11 and 3 more"),
    ],
)
def test_a_choice_is_written_as_people_say_it(words: list[str], text: str) -> None:
    assert either(words) == text


@pytest.mark.parametrize(
    ("text", "shown"),
    [("a b", "'a b'"), ("two\nlines", "'two lines'"), ("x" * 61, f"'{'x' * 60}...'"), ("", "''")],
)
def test_a_quoted_text_is_short_and_on_one_line(text: str, shown: str) -> None:
    assert quoted(text) == shown
