"""Numbers off the wire: what is a reading, what is a flag, what is neither."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from rigctl.errors import FramingError
from rigctl.links.numbers import NotAReading, Real, parse_real

WHERE = "tcp://10.0.0.7:5025"


@pytest.mark.parametrize(
    ("text", "value"),
    [
        ("12", 12.0),  # NR1
        ("+0", 0.0),
        ("-0042", -42.0),
        ("12.5", 12.5),  # NR2
        ("12.", 12.0),
        (".5", 0.5),
        ("1.25E+01", 12.5),  # NR3
        ("-1.25e-03", -0.00125),
        (" 1.5\t", 1.5),
        ("9.8E37", 9.8e37),
        ("1E-400", 0.0),
    ],
)
def test_every_form_of_number_is_read(text: str, value: float) -> None:
    assert parse_real(text, address=WHERE) == Real(value)


@pytest.mark.parametrize(
    ("text", "flag"),
    [
        ("9.9E37", NotAReading.OVER),
        ("+9.90000000E+37", NotAReading.OVER),
        ("9.8999999E37", NotAReading.OVER),  # a single-precision 9.9E37 printed long
        ("9.9e37", NotAReading.OVER),
        ("99000000000000000000000000000000000000", NotAReading.OVER),
        ("1E38", NotAReading.OVER),
        ("1E999", NotAReading.OVER),
        ("-9.9E37", NotAReading.UNDER),
        ("-1E999", NotAReading.UNDER),
        ("9.91E37", NotAReading.NAN),
        ("9.9100003E37", NotAReading.NAN),
        ("-9.91E37", NotAReading.NAN),
    ],
)
def test_a_number_as_large_as_infinity_is_a_flag_and_never_a_reading(text: str, flag: NotAReading) -> None:
    real = parse_real(text, address=WHERE)

    assert real.flag is flag
    assert math.isnan(real.value)


@pytest.mark.parametrize(
    "text",
    ["", " ", "1.5 W", "1,5", "1_000", "nan", "inf", "OVLD", "E5", "1E", "0x10", "--1", "1 2", "67E-", "١٢"],
)
def test_what_is_no_number_is_a_framing_error(text: str) -> None:
    with pytest.raises(FramingError, match="is no number") as caught:
        parse_real(text, address=WHERE)

    assert caught.value.address == WHERE
    assert caught.value.partial == text.encode()


@given(st.floats(min_value=-9.8e37, max_value=9.8e37))
def test_a_reading_survives_the_wire(value: float) -> None:
    assert parse_real(f"{value:.17E}", address=WHERE) == Real(value)


@given(st.floats(min_value=9.9e37, allow_nan=False))
def test_no_number_from_infinity_on_passes_as_a_reading(value: float) -> None:
    for text in (f"{value:.17E}", f"{-value:.17E}"):
        if "INF" not in text:
            assert parse_real(text, address=WHERE).flag is not None


@given(st.text(max_size=12))
def test_any_text_is_a_number_or_a_framing_error(text: str) -> None:
    try:
        real = parse_real(text, address=WHERE)
    except FramingError:
        return
    assert math.isnan(real.value) == (real.flag is not None)
