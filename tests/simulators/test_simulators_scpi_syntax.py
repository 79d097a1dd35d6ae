"""Headers, paths and parameters by the rules of IEEE 488.2 and SCPI-1999; the section stands at each rule."""

import itertools
import math
import re

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rigctl_sim.scpi.complaint import Complaint
from rigctl_sim.scpi.mnemonic import forms
from rigctl_sim.scpi.parameters import (
    Parameter,
    boolean,
    channel_list,
    choice,
    number,
    range_or_word,
    whole_number,
)
from rigctl_sim.scpi.syntax import Command, Grammar, Unit, split_outside

POWER = number("W", 0.0, 1.0, default=0.5)


def silent(*_: object) -> None:
    """Stand in for what a command does."""


def grammar() -> Grammar:
    patterns = (
        "*CLS",
        "*IDN?",
        "[SENSe#]:POWer[:DC]:RANGe[:UPPer]?",
        "[SENSe#]:POWer[:DC]:RANGe:AUTO?",
        "INITiate#[:IMMediate]",
        "SYSTem:ERRor[:NEXT]?",
    )
    takers = (
        Command("[SENSe#]:POWer[:DC]:RANGe[:UPPer]", silent, (POWER,)),
        Command("[SENSe#]:POWer[:DC]:RANGe:AUTO", silent, (boolean,)),
        Command("DATA:PAIR", silent, (POWER, POWER), needs=1),
    )
    return Grammar([*(Command(pattern, silent) for pattern in patterns), *takers])


def complaints(message: str) -> list[int]:
    return [unit.complaint for unit in grammar().parse(message.encode())]


def values(message: str) -> list[tuple[object, ...]]:
    return [unit.values for unit in grammar().parse(message.encode())]


# IEEE 488.2, 7.6.1 and SCPI-1999 volume 1, 6.2.1: short and long forms


@pytest.mark.parametrize(
    ("printed", "expected"),
    [("RANGe", ("RANGE", "RANG")), ("POWer", ("POWER", "POW")), ("UNIT", ("UNIT",)), ("DC", ("DC",))],
)
def test_a_mnemonic_has_its_long_and_its_short_form(printed: str, expected: tuple[str, ...]) -> None:
    assert forms(printed) == expected


SPELLINGS = [
    ":".join((*head, power, *dc, rang, *upper))
    for head, power, dc, rang, upper in itertools.product(
        ([], ["SENS"], ["SENSE"], ["SENSE1"]),
        ("POW", "POWER"),
        ([], ["DC"]),
        ("RANG", "RANGE"),
        ([], ["UPP"], ["UPPER"]),
    )
]


@pytest.mark.parametrize("spelling", SPELLINGS)
def test_every_legal_spelling_is_understood_in_any_case(spelling: str) -> None:
    assert complaints(f"{spelling}?") == [0]
    assert complaints(f":{spelling.lower()}?") == [0]
    assert complaints(f"{spelling.title()} 0.1") == [0]


@pytest.mark.parametrize(
    "header", ["SEN:POW:RANG?", "SENSE:POWE:RANG?", "SENS:POW:RANGES?", "SENS:POW:RAN?", "POW:RANG:UP?"]
)
def test_nothing_between_the_short_and_the_long_form_is_understood(header: str) -> None:
    assert complaints(header) == [-113]


@settings(deadline=None)
@given(length=st.integers(1, 8))
def test_only_whole_forms_of_a_word_are_understood(length: int) -> None:
    word = "INITIATE"[:length]

    assert complaints(word) == ([0] if word in ("INIT", "INITIATE") else [-113])


@pytest.mark.parametrize("header", ["POW:RANG:UPP:DC?", "RANG?", "SENS:RANG:POW?", "SENS?", "POW?"])
def test_nodes_stand_in_their_order_and_only_bracketed_ones_may_be_left_out(header: str) -> None:
    assert complaints(header) == [-113]


@pytest.mark.parametrize(("text", "value"), [("-40", -40.0), ("-0.04KCEL", -40.0), ("-10000MCEL", -10.0)])
def test_bounds_below_zero_are_within_them(text: str, value: float) -> None:
    assert number("CEL", -40.0, -10.0, default=-20.0)(text) == pytest.approx(value)


@pytest.mark.parametrize(("low", "high", "text"), [(5e-6, 1.0, "5UCEL"), (-1.0, -5e-6, "-5UCEL")])
def test_a_bound_written_with_a_prefix_is_within(low: float, high: float, text: str) -> None:
    """5 times 1e-6 is a digit of its last place below 5e-6."""
    assert number("CEL", low, high, default=low)(text) == pytest.approx(math.copysign(5e-6, low))


@pytest.mark.parametrize("text", ["-40.001", "-9.999", "0"])
def test_beyond_bounds_below_zero_is_out_of_range(text: str) -> None:
    with pytest.raises(Complaint, match="-222"):
        number("CEL", -40.0, -10.0, default=-20.0)(text)


# SCPI-1999 volume 1, 6.2.5.2: numeric suffixes


def test_the_suffix_1_is_the_same_as_none() -> None:
    assert complaints("SENSE1:POWER:RANGE?;:INIT1") == [0, 0]


def test_another_suffix_is_out_of_range() -> None:
    assert complaints("SENSE2:POWER:RANGE?") == [-114]


def by_channel() -> Grammar:
    return Grammar(
        [
            Command("[SOURce#]:CURRent", lambda _: "first", channel=1),
            Command("[SOURce#]:CURRent", lambda _: "second", channel=12),
            Command("OUTPut#:STATe", lambda _: "third", channel=12),
        ]
    )


@pytest.mark.parametrize(
    ("message", "answer"),
    [
        (b"CURR", "first"),
        (b"SOUR:CURR", "first"),
        (b"SOURCE1:CURRENT", "first"),
        (b"SOUR12:CURR", "second"),
        (b"OUTP12:STAT", "third"),
    ],
)
def test_a_suffix_names_a_channel(message: bytes, answer: str) -> None:
    (unit,) = by_channel().parse(message)

    assert unit.act is not None
    assert unit.act(0.0) == answer


@pytest.mark.parametrize("message", [b"SOUR2:CURR", b"SOUR0:CURR", b"OUTP:STAT", b"OUTP1:STAT"])
def test_a_channel_that_is_not_there_is_out_of_range(message: bytes) -> None:
    assert [unit.complaint for unit in by_channel().parse(message)] == [-114]


def test_a_suffix_where_none_belongs_is_another_header() -> None:
    assert complaints("SENSE:POWER1:RANGE?") == [-113]


def test_a_mnemonic_of_more_than_twelve_letters_is_too_long() -> None:
    assert complaints("SENSE:POWERPOWERPOWER:RANGE?") == [-112]


# SCPI-1999 volume 1, 6.2.4: the path


def test_a_header_after_a_semicolon_goes_on_at_the_same_node() -> None:
    assert complaints("SENSE:POWER:RANGE:UPPER?;AUTO?") == [0, 0]


def test_the_node_is_that_of_the_header_as_it_was_sent() -> None:
    assert complaints("SENSE:POWER:RANGE?;AUTO?") == [0, -113]
    assert complaints("SENSE:POWER:RANGE?;RANGE:AUTO?") == [0, 0]


def test_a_leading_colon_goes_back_to_the_root() -> None:
    assert complaints("SENSE:POWER:RANGE:UPPER?;:SYSTEM:ERROR?") == [0, 0]
    assert complaints("SENSE:POWER:RANGE:UPPER?;SYSTEM:ERROR?") == [0, -113]


def test_a_common_command_leaves_the_path_alone() -> None:
    assert complaints("SENSE:POWER:RANGE:UPPER?;*CLS;AUTO?") == [0, 0, 0]


def test_a_common_command_takes_no_colon() -> None:
    assert complaints(":*CLS") == [-102]


def test_a_new_message_starts_at_the_root() -> None:
    kept = grammar()
    kept.parse(b"SENSE:POWER:RANGE:UPPER?")

    assert [unit.complaint for unit in kept.parse(b"AUTO?")] == [-113]


# IEEE 488.2, 7.4 and 7.5: separators and white space


@pytest.mark.parametrize("message", ["", " ", "\r", "\t \r"])
def test_an_empty_message_asks_for_nothing(message: str) -> None:
    assert complaints(message) == []


@pytest.mark.parametrize("message", ["*CLS;", ";*CLS", "*CLS;;*CLS", "POW:RANG 1,", "DATA:PAIR ,1", "?", ":", "1"])
def test_what_lacks_a_part_is_a_syntax_error(message: str) -> None:
    assert complaints(message)[-1] == -102


def test_white_space_stands_around_everything_but_within_headers() -> None:
    assert complaints(" \tSENSE:POWER:RANGE \t 0.1  ;  :INIT \r") == [0, 0]
    assert complaints("SENSE: POWER:RANGE?") == [-102]


def test_a_command_error_ends_the_message() -> None:
    assert complaints("*CLS;FOO;*CLS") == [0, -113]


def test_an_execution_error_spares_the_rest_of_the_message() -> None:
    assert complaints("POWER:RANGE 7;:INIT") == [-222, 0]


@pytest.mark.parametrize("message", [b"\xb5W", b"POW:RANG 1 \xff", b"*IDN?\x00"])
def test_bytes_that_are_no_ascii_are_invalid_characters(message: bytes) -> None:
    assert [unit.complaint for unit in grammar().parse(message)] == [-101]


def test_a_query_and_a_command_of_one_header_are_two() -> None:
    assert complaints("*IDN") == [-113]
    assert complaints("*CLS?") == [-113]


def test_separators_within_quotes_and_parentheses_separate_nothing() -> None:
    assert split_outside("""a;"b;c";'d;"e';(f;(g;));h""", ";") == [
        "a",
        '"b;c"',
        """'d;"e'""",
        "(f;(g;))",
        "h",
    ]


def test_a_string_that_is_not_closed_is_an_invalid_string() -> None:
    assert complaints('POW:RANG "1') == [-151]


# numbers of parameters


def test_a_missing_parameter_is_told() -> None:
    assert complaints("POW:RANG") == [-109]


def test_a_parameter_too_many_is_told() -> None:
    assert complaints("POW:RANG 0.1,0.2") == [-108]
    assert complaints("*CLS 1") == [-108]


def test_a_parameter_that_may_be_left_out_is_not_missed() -> None:
    assert values("DATA:PAIR 0.1") == [(0.1,)]
    assert values("DATA:PAIR 0.1, 0.2") == [(0.1, 0.2)]


# SCPI-1999 volume 1, chapter 7: types


def read(parameter: Parameter, text: str) -> object:
    """What a parameter reads as: its value, or the code of the complaint."""
    try:
        return parameter(text)
    except Complaint as complaint:
        return complaint.code


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("0.25", 0.25),
        ("+.25", 0.25),
        ("25E-2", 0.25),
        ("2.5 e -1", 0.25),
        ("250MW", 0.25),
        ("250 mW", 0.25),
        ("250000 UW", 0.25),
        ("0.25 W", 0.25),
        ("1E-9 MAW", 1e-3),
        ("#H1", 1.0),
        ("#b01", 1.0),
        ("#Q1", 1.0),
        ("MIN", 0.0),
        ("maximum", 1.0),
        ("DEF", 0.5),
        ("1.0000000000001", 1.0000000000001),
        ("2", -222),
        ("-1", -222),
        ("1 V", -131),
        ("1 XW", -131),
        ("MAXI", -141),
        ("ON", -141),
        ("1.2.3", -120),
        ("1E", -131),
        ("#H", -120),
        ("--1", -120),
        ("#15hello", -168),
        ('"1"', -104),
        ("(@1)", -104),
    ],
)
def test_numbers_come_with_prefixes_bounds_and_named_values(text: str, expected: object) -> None:
    assert read(POWER, text) == pytest.approx(expected, rel=1e-12)


def test_a_length_may_be_given_in_nanometres() -> None:
    wavelength = number("M", 200e-9, 2500e-9, default=633e-9)

    assert read(wavelength, "785.2 NM") == pytest.approx(785.2e-9, rel=1e-12)
    assert read(wavelength, "0.7852 um") == pytest.approx(785.2e-9, rel=1e-12)
    assert read(wavelength, "785.2") == -222


def test_a_whole_number_is_rounded_and_bears_no_unit() -> None:
    count = whole_number(1, 100, default=1)

    assert [read(count, text) for text in ("4", "4.4", "4.5", "3.6", "MAX")] == [4, 4, 5, 4, 100]
    assert [read(count, text) for text in ("0", "101", "4 W")] == [-222, -222, -138]


@pytest.mark.parametrize(
    ("text", "expected"),
    [("ON", True), ("off", False), ("1", True), ("0", False), ("0.4", False), ("-3", True), ("YES", -141)],
)
def test_booleans_are_words_or_rounded_numbers(text: str, expected: object) -> None:
    assert read(boolean, text) == expected


def test_a_choice_has_long_and_short_forms() -> None:
    source = choice("IMMediate", "BUS")

    assert [read(source, text) for text in ("imm", "IMMEDIATE", "bus")] == ["IMMediate", "IMMediate", "BUS"]
    assert [read(source, text) for text in ("EXT", "IMMED", "1")] == [-224, -224, -104]


def test_a_query_may_ask_for_the_bounds() -> None:
    assert [read(range_or_word, text) for text in ("min", "MAXIMUM", "DEF", "MEAN")] == [
        "MIN",
        "MAX",
        "DEF",
        -141,
    ]


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("(@3)", (3,)),
        ("(@1,3)", (1, 3)),
        ("( @ 1 , 3 )", (1, 3)),
        ("(@1:3)", (1, 2, 3)),
        ("(@3:1,8)", (3, 2, 1, 8)),
        ("(@0)", -222),
        ("(@9)", -222),
        ("(@1:99999)", -222),
        ("(@)", -170),
        ("(@1;2)", -170),
        ("(1)", -170),
        ("3", -104),
    ],
)
def test_channel_lists_hold_channels_and_ranges(text: str, expected: object) -> None:
    assert read(channel_list(8), text) == expected


# what is kept


def test_a_message_is_parsed_once() -> None:
    kept = grammar()

    assert kept.parse(b"*IDN?") is kept.parse(b"*IDN?")


def test_many_different_messages_do_not_pile_up() -> None:
    kept = grammar()

    parsed = [kept.parse(f"POW:RANG {value / 5000}".encode())[0] for value in range(2000)]

    assert [unit.values for unit in parsed] == [(value / 5000,) for value in range(2000)]
    assert len(kept._kept) <= Grammar._MOST_KEPT


@settings(deadline=None)
@given(st.binary(max_size=60))
def test_no_message_is_too_strange(message: bytes) -> None:
    units = grammar().parse(message.replace(b"\n", b" "))

    assert all(isinstance(unit, Unit) for unit in units)


@settings(deadline=None)
@given(st.text(alphabet="SENPOWRAG:;?*#()@\"', 019.E", max_size=40))
def test_no_message_of_the_right_letters_is_too_strange(text: str) -> None:
    units = grammar().parse(text.encode())

    assert all(unit.act is not None or re.fullmatch(r"-[12]\d\d", str(unit.complaint)) for unit in units)
