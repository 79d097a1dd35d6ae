"""Names inside a run file."""

import re

import pytest
from hypothesis import given
from hypothesis import strategies as st

from rigctl.record.names import DETECTOR_SUFFIXES, clean_name, free_names, plain_text

NEXUS_NAME = re.compile(r"[a-zA-Z0-9_]([a-zA-Z0-9_.]*[a-zA-Z0-9_])?")


@pytest.mark.parametrize(
    ("text", "name"),
    [
        ("signal", "signal"),
        ("part mount", "part_mount"),
        ("part.dial offset", "part.dial_offset"),
        ("Gerät №2", "Gerat_No2"),
        ("45 ° analyser", "_45_analyser"),
        ("pair, shuffled", "pair_shuffled"),
        ("empty pair before", "empty_pair_before"),
        ("at 22 °C / cold", "at_22_C_cold"),
        (".hidden.", "hidden"),
        ("", "_"),
        ("λ", "_"),
    ],
)
def test_a_name_reads_like_the_words_it_came_from(text: str, name: str) -> None:
    assert clean_name(text) == name


@given(st.text())
def test_every_name_is_valid_in_nexus(text: str) -> None:
    assert NEXUS_NAME.fullmatch(clean_name(text))


@given(st.lists(st.text(max_size=4), max_size=8))
def test_names_of_one_group_differ_with_every_suffix(texts: list[str]) -> None:
    names = free_names(texts, suffixes=DETECTOR_SUFFIXES, taken=("time",))

    every = [name + suffix for name in names for suffix in DETECTOR_SUFFIXES]
    assert len({*every, "time"}) == len(every) + 1


def test_the_later_of_two_equal_names_is_numbered() -> None:
    assert free_names(("a b", "a_b", "time"), taken=("time",)) == ("a_b", "a_b_2", "time_2")


def test_a_detector_called_like_another_ones_variable_gets_out_of_its_way() -> None:
    assert free_names(("a", "a sd"), suffixes=("", "_sd")) == ("a", "a_sd_2")


@given(st.text())
def test_plain_text_is_printable_ascii(text: str) -> None:
    assert plain_text(text).isascii()
    assert plain_text(text).isprintable()


def test_plain_text_keeps_the_letters_under_their_accents() -> None:
    assert plain_text("Jürgen\tat 45 °") == "Jurgen at 45 ?"
