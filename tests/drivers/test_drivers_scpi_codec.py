"""What SCPI instruments write, and how numbers are sent to them."""

import math
from collections.abc import Callable

import pytest
from codec_checks import Sample, check_sample, is_refused, mutated
from hypothesis import given
from hypothesis import strategies as st
from scripted_twin import ADDRESS

from rigctl.errors import FramingError
from rigctl.interfaces import Flag, Identity
from rigctl_drivers.scpi_codec import (
    Complaint,
    Reply,
    format_number,
    is_same_number,
    is_same_word,
    parse_bool,
    parse_complaint,
    parse_identity,
    parse_length_unit_m,
    parse_number,
    parse_numbers,
    parse_reading,
    parse_readings,
    parse_register,
    parse_reply,
    parse_text,
    split_outside_quotes,
)


def of_text(parse: Callable[..., object], **fixed: object) -> Callable[[bytes], object]:
    return lambda data: parse(parse_text(data, address=ADDRESS), address=ADDRESS, **fixed)


def of_line(parse: Callable[..., object], **fixed: object) -> Callable[[bytes], object]:
    return lambda data: parse(data, address=ADDRESS, **fixed)


SAMPLES = (
    Sample(
        "compound reply",
        of_line(parse_reply, values=3),
        b'1.0E-03,2.0E-03;2.0E-03;0;0,"No error"',
        Reply(("1.0E-03,2.0E-03", "2.0E-03", "0"), Complaint(0, "No error")),
        is_closed=True,
    ),
    Sample(
        "compound reply with a complaint that holds separators",
        of_line(parse_reply, values=1),
        b'-222,"Data out of range;RANGE ""9"", W"',
        Reply((), Complaint(-222, 'Data out of range;RANGE "9", W')),
    ),
    Sample("complaint", of_text(parse_complaint), b'+0,"No error"', Complaint(0, "No error"), is_closed=True),
    Sample(
        "identity",
        of_line(parse_identity),
        b"polrig,simulated power meter,head 7,1.0",
        Identity("polrig", "simulated power meter", "head 7", "1.0"),
    ),
    Sample("boolean", of_text(parse_bool), b"1", True),
    Sample("number", of_text(parse_number), b"+2.5E-03", 2.5e-3),
    Sample(
        "numbers of one setting",
        of_text(parse_numbers, count=3),
        b"1.12924E-03,2.34108E-04, 8.7755E-08",
        (1.12924e-3, 2.34108e-4, 8.7755e-8),
    ),
    Sample("reading", of_text(parse_reading), b"-9.9E37", -math.inf),
    Sample("status register", of_text(parse_register), b"+528", 528),
    Sample("unit of a wavelength", of_text(parse_length_unit_m), b"785.2", 1e-9),
    Sample("readings", of_text(parse_readings, count=2), b"1.5E-3,-2E-6", ((1.5e-3, -2e-6), Flag(0))),
    Sample("fields", of_text(split_outside_quotes, separator=";"), b'1;"a;b" ; 3', ("1", '"a;b"', "3")),
    Sample("text", of_line(parse_text), b"plain ~ text", "plain ~ text"),
)


@pytest.mark.parametrize("sample", SAMPLES, ids=lambda sample: sample.name)
def test_a_parser_reads_the_whole_line_and_refuses_the_rest_only_by_the_documented_error(
    sample: Sample,
) -> None:
    check_sample(sample)


@given(data=st.data())
def test_no_mutation_of_a_line_breaks_a_parser(data: st.DataObject) -> None:
    sample = data.draw(st.sampled_from(SAMPLES))
    is_refused(sample.parse, data.draw(mutated(sample.whole)))


@given(noise=st.binary(max_size=60))
def test_no_noise_breaks_a_parser(noise: bytes) -> None:
    for sample in SAMPLES:
        is_refused(sample.parse, noise)


@pytest.mark.parametrize("line", [b'1;2;0,"No error"', b'0,"No error"', b'1;;2;0,"No error"', b'1;2;3;4;0,"No error"'])
def test_a_reply_with_another_number_of_values_is_refused(line: bytes) -> None:
    with pytest.raises(FramingError, match="instead of 3"):
        parse_reply(line, values=3, address=ADDRESS)


def test_a_complaint_explains_values_that_are_missing() -> None:
    reply = parse_reply(b'2.0E-03;-230,"Data corrupt or stale"', values=3, address=ADDRESS)

    assert reply.complaint == Complaint(-230, "Data corrupt or stale")


def test_a_quote_that_is_not_closed_is_refused() -> None:
    with pytest.raises(FramingError, match="quote that is not closed"):
        parse_reply(b'1;0,"No error', values=1, address=ADDRESS)


def test_a_zero_in_an_identity_stands_for_what_is_not_known() -> None:
    identity = parse_identity(b"ACME , PM-1,0,0", address=ADDRESS)

    assert identity == Identity("ACME", "PM-1", "", "")


def test_commas_beyond_the_fourth_field_belong_to_the_firmware() -> None:
    assert parse_identity(b"A,B,C,1.0,2.0", address=ADDRESS).firmware == "1.0,2.0"


@pytest.mark.parametrize("line", [b"", b"A,B,C", b"A,,C,D", b"error:1", b"<Idle|MPos:0.000>"])
def test_what_has_not_four_fields_and_a_model_is_no_identity(line: bytes) -> None:
    with pytest.raises(FramingError, match="no identity"):
        parse_identity(line, address=ADDRESS)


@pytest.mark.parametrize("text", ["ON", "2", "01", "", "true", "1.0"])
def test_a_boolean_is_0_or_1_and_nothing_else(text: str) -> None:
    with pytest.raises(FramingError):
        parse_bool(text, address=ADDRESS)


@pytest.mark.parametrize(
    ("text", "flags"),
    [
        ("9.9E37,1", Flag.OVERLOAD),
        ("-9.9E+37,1", Flag.UNDERRANGE),
        ("9.91E37,1", Flag.NOT_A_NUMBER),
        ("9.9E37,9.91E37", Flag.OVERLOAD | Flag.NOT_A_NUMBER),
    ],
)
def test_readings_that_are_none_become_nan_and_their_flags_add_up(text: str, flags: Flag) -> None:
    levels_w, found = parse_readings(text, count=2, address=ADDRESS)

    assert found == flags
    assert math.isnan(levels_w[0])


@pytest.mark.parametrize(
    ("text", "value"), [("1.5E-3", 1.5e-3), ("9.9E37", math.inf), ("-9.90000E+37", -math.inf), ("9.91E37", math.nan)]
)
def test_a_reading_beyond_what_can_be_shown_is_infinite(text: str, value: float) -> None:
    assert parse_reading(text, address=ADDRESS) == pytest.approx(value, nan_ok=True)


@pytest.mark.parametrize("text", ["-1", "32768", "1.0", "1E2", "", "#H10", "999999"])
def test_a_status_register_is_a_whole_number_of_fifteen_bits(text: str) -> None:
    with pytest.raises(FramingError, match="no status register"):
        parse_register(text, address=ADDRESS)


@pytest.mark.parametrize("text", ["1,2", "1,2,3,4", "1"])
def test_a_setting_with_a_number_too_few_or_too_many_is_refused(text: str) -> None:
    with pytest.raises(FramingError, match="instead of 3"):
        parse_numbers(text, count=3, address=ADDRESS)


def test_an_overload_among_the_numbers_of_a_setting_is_refused() -> None:
    with pytest.raises(FramingError, match="no number a setting can have"):
        parse_numbers("1,9.9E37,3", count=3, address=ADDRESS)


def test_a_block_with_a_reading_too_few_is_refused() -> None:
    with pytest.raises(FramingError, match="2 readings instead of 3"):
        parse_readings("1,2", count=3, address=ADDRESS)


def test_an_overload_is_no_number_of_a_setting() -> None:
    with pytest.raises(FramingError, match="no number a setting can have"):
        parse_number("9.9E37", address=ADDRESS)


@pytest.mark.parametrize(
    ("text", "unit_m"), [("785.2", 1e-9), ("7.852E-07", 1.0), ("1.06E-05", 1.0), ("1.55E+03", 1e-9)]
)
def test_a_wavelength_above_a_thousandth_can_only_be_in_nm(text: str, unit_m: float) -> None:
    assert parse_length_unit_m(text, address=ADDRESS) == unit_m


@pytest.mark.parametrize(
    ("asked", "text", "is_same"),
    [
        (0.002, "2.0E-03", True),
        (0.002, "2.1E-03", False),
        (785.2, "785", True),  # a head that shows whole nanometres
        (785.2, "785.9", False),
        (785.2, "786", False),
        (853.0, "8.5E+02", False),  # rounded by more than a thousandth
        (0.1, "1.000000E-01", True),
        (1.0 / 3.0, "3.333333E-01", True),
        (0.0, "0", True),
        (0.0, "1E-30", False),
        (1.0, "0E9999", False),
        (1.0, "1" + "0" * 400 + "E-400", True),
    ],
)
def test_a_number_read_back_may_be_rounded_to_its_digits_and_no_more(asked: float, text: str, is_same: bool) -> None:
    assert is_same_number(asked, text) == is_same


def test_a_number_read_back_in_another_unit_is_compared_in_the_unit_asked() -> None:
    assert is_same_number(785.2e-9, "785.2", scale=1e-9)
    assert not is_same_number(785.2e-9, "785.2")


@pytest.mark.parametrize(
    ("asked", "text", "is_same"),
    [
        (0.0, "4.9E-06", True),
        (0.0, "5.2E-06", False),
        (0.0001234, "1.2E-04", True),
        (0.0001234, "1.3E-04", False),
        (0.034, "-3.4E-02", False),
    ],
)
def test_a_number_may_be_rounded_to_the_steps_of_the_instrument(asked: float, text: str, is_same: bool) -> None:
    assert is_same_number(asked, text, step=1e-5) == is_same


@given(value=st.floats(1e-12, 1e12), digits=st.integers(4, 12))
def test_a_number_written_by_any_instrument_with_four_digits_is_the_same_number(value: float, digits: int) -> None:
    assert is_same_number(value, f"{value:.{digits}E}")


@given(value=st.floats(1e-12, 1e12), off=st.floats(2e-3, 1.0))
def test_a_number_off_by_two_thousandths_is_never_the_same(value: float, off: float) -> None:
    assert not is_same_number(value, f"{value * (1 + off):.9E}")


@given(value=st.floats(1e-15, 1e15))
def test_a_number_is_sent_with_every_digit_that_an_instrument_can_use(value: float) -> None:
    assert math.isclose(float(format_number(value)), value, rel_tol=1e-8)


@pytest.mark.parametrize(
    ("asked", "text", "is_same"),
    [
        ("ASCII", "ASC", True),
        ("ASCII", "ASC,0", True),
        ("ASCII", "ascii", True),
        ("IMMEDIATE", "IMM", True),
        ("W", "W", True),
        ("W", "DBM", False),
        ("IMMEDIATE", "I", False),
        ("0", "1", False),
        ("ASCII", "REAL,32", False),
        ("ASCII", "", False),
    ],
)
def test_a_mnemonic_reads_back_in_its_short_or_long_form(asked: str, text: str, is_same: bool) -> None:
    assert is_same_word(asked, text) == is_same
