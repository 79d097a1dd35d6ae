"""Quantities as people write them; a general units parser is the oracle where both may read the same."""

import math
from collections.abc import Callable

import pint
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from rigctl.errors import QuantityError
from rigctl.kinds import KINDS
from rigctl.quantities import Measured, format_quantity, parse_measured, parse_quantity, parse_span, parse_uncertainty

UNITS: pint.UnitRegistry[float] = pint.UnitRegistry()
ORACLE = {
    "angle": (
        "degree",
        {"deg": "degree", "rad": "radian", "mrad": "mrad", "arcmin": "arcmin", "arcsec": "arcsec"},
    ),
    "power": ("W", {"W": "W", "mW": "mW", "uW": "uW", "nW": "nW", "pW": "pW"}),
    "time": ("s", {"s": "s", "ms": "ms", "us": "us", "min": "minute", "h": "hour", "d": "day"}),
    "length": ("m", {"m": "m", "mm": "mm", "um": "um", "nm": "nm"}),
    "drift": ("1/hour", {"1/h": "1/hour", "%/h": "percent/hour", "ppm/h": "ppm/hour", "1/d": "1/day"}),
    "angular speed": ("degree/s", {"deg/s": "degree/s", "rad/s": "radian/s", "rpm": "revolution/minute"}),
    "angular acceleration": ("degree/s**2", {"deg/s2": "degree/s**2", "rad/s2": "radian/s**2"}),
    "temperature difference": ("kelvin", {"K": "kelvin", "mK": "mK"}),
    "temperature slope": ("kelvin/s", {"K/s": "kelvin/s", "K/min": "kelvin/minute", "mK/min": "mK/minute"}),
    "current": ("A", {"A": "A", "mA": "mA", "uA": "uA"}),
    "current slope": ("A/s", {"A/s": "A/s", "mA/s": "mA/s", "uA/s": "uA/s"}),
    "voltage": ("V", {"V": "V", "mV": "mV"}),
    "resistance": ("ohm", {"ohm": "ohm", "Ohm": "ohm", "kohm": "kiloohm", "kOhm": "kiloohm"}),
    "coefficient": ("1/kelvin", {"1/K": "1/kelvin", "%/K": "percent/kelvin", "ppm/K": "ppm/kelvin"}),
    "frequency": ("Hz", {"Hz": "Hz", "kHz": "kHz"}),
    "retardance": ("turn", {"waves": "turn", "deg": "degree", "rad": "radian"}),
}
CASES = [(kind, unit) for kind, (_, units) in ORACLE.items() for unit in units]
positive = st.floats(min_value=1e-6, max_value=1e6)


def refusal(text: str, kind: str) -> QuantityError:
    with pytest.raises(QuantityError) as caught:
        parse_quantity(text, kind)
    return caught.value


@pytest.mark.parametrize(("kind", "unit"), CASES)
@given(number=positive)
@settings(deadline=None)
def test_every_unit_has_the_size_that_a_units_package_gives_it(kind: str, unit: str, number: float) -> None:
    base, names = ORACLE[kind]
    expected = UNITS.Quantity(number, names[unit]).to(base).magnitude

    value = parse_quantity(f"{number!r} {unit}", kind)

    assert value == pytest.approx(expected, rel=1e-12)


@given(number=st.floats(min_value=0.0, max_value=1e4), unit=st.sampled_from(["degC", "K"]))
@settings(deadline=None)
def test_a_temperature_has_the_zero_that_a_units_package_gives_it(number: float, unit: str) -> None:
    expected = UNITS.Quantity(number, {"degC": "degC", "K": "kelvin"}[unit]).to("degC").magnitude

    assert parse_quantity(f"{number!r} {unit}", "temperature") == pytest.approx(expected, rel=1e-12, abs=1e-9)


@pytest.mark.parametrize(
    ("text", "kind", "what"),
    [
        ("0 ohm", "resistance", "a resistance of 0 ohm is not above zero"),
        ("-5 mA/s", "current slope", "a current slope of -5 mA/s is not above zero"),
        ("0 K/min", "temperature slope", "a temperature slope of 0 K/min is not above zero"),
        ("0 Hz", "frequency", "a frequency of 0 Hz is not above zero"),
        ("5 degC", "temperature difference", "'degC' is not a unit of a temperature difference"),
        ("22 C", "temperature", "'C' is not a unit of a temperature"),
        ("34 MA", "current", "'MA' is not a unit of a current"),
    ],
)
def test_what_the_nature_of_a_kind_does_not_allow_is_refused(text: str, kind: str, what: str) -> None:
    assert refusal(text, kind).what == what


def test_kelvins_count_from_absolute_zero_to_the_last_digit() -> None:
    assert [parse_quantity(text, "temperature") for text in ("295.15 K", "22 °C", "0 K")] == [22.0, 22.0, -273.15]


@pytest.mark.parametrize("text", ["-274 degC", "-0.1 K"])
def test_nothing_is_colder_than_absolute_zero(text: str) -> None:
    assert refusal(text, "temperature").what == f"a temperature of {text} is below all there is"


def test_the_uncertainty_of_a_temperature_is_a_difference() -> None:
    assert parse_measured("295.15 K +- 0.1 K", "temperature") == Measured(22.0, 0.1)


def test_a_percentage_of_a_temperature_means_nothing() -> None:
    with pytest.raises(QuantityError, match="of a temperature has no meaning"):
        parse_measured("22 degC +- 1 %", "temperature")


@pytest.mark.parametrize(
    ("text", "kind", "nominal", "u"),
    [
        ("0.002 waves", "retardance", "0.5 waves", 0.002),
        ("20 %", "ratio", "1000:1 +- 50 %", 2e-4),
        ("0.2 deg (k=2)", "angle", "0 deg", 0.1),
        (" 1 nm ", "retardance", "0.5 waves", 1 / 785.2),
    ],
)
def test_an_uncertainty_may_stand_by_itself(text: str, kind: str, nominal: str, u: float) -> None:
    assert parse_uncertainty(text, kind, nominal=nominal, wavelength_m=785.2e-9) == pytest.approx(u)


@pytest.mark.parametrize("text", ["0 deg", "-1 deg", "5 mm", "", "1 deg +- 1 deg", "1" * 300])
def test_an_uncertainty_that_is_none_is_refused(text: str) -> None:
    with pytest.raises(QuantityError):
        parse_uncertainty(text, "angle", nominal="22.5 deg")


@pytest.mark.parametrize("text", ["1000:1 to 100:1", "100:1 to 1000:1"])
def test_the_ends_of_a_span_of_ratios_may_stand_either_way(text: str) -> None:
    assert parse_span(text, "ratio") == (0.001, 0.01)


@pytest.mark.parametrize("kind", KINDS)
def test_the_example_of_a_kind_is_a_quantity_of_it(kind: str) -> None:
    value = parse_quantity(KINDS[kind].example, kind)

    assert math.isfinite(value)


@pytest.mark.parametrize(
    ("text", "kind", "value"),
    [
        ("785.2 nm", "length", 785.2e-9),
        ("20 uW", "power", 20e-6),
        ("20 µW", "power", 20e-6),
        ("20 μW", "power", 20e-6),
        ("22.5 °", "angle", 22.5),
        ("+5 deg", "angle", 5.0),
        ("-5 deg", "angle", -5.0),
        (".5 deg", "angle", 0.5),
        ("1e3 ms", "time", 1.0),
        ("5  mW", "power", 5e-3),
        (" 5 mW ", "power", 5e-3),
        ("100 deg/s^2", "angular acceleration", 100.0),
        ("100 deg/s²", "angular acceleration", 100.0),
        ("4 readings", "count", 4.0),
        ("1 reading", "count", 1.0),
        ("4", "count", 4.0),
        ("2", "number", 2.0),
    ],
)
def test_a_quantity_is_number_space_unit(text: str, kind: str, value: float) -> None:
    assert parse_quantity(text, kind) == pytest.approx(value, rel=1e-15)


def test_decimal_prefixes_give_the_float_that_the_number_names() -> None:
    assert [parse_quantity(text, "power") for text in ("20 uW", "30 nW", "3 mW")] == [20e-6, 30e-9, 3e-3]


@pytest.mark.parametrize("text", ["1000:1", "1:1000", "1000 : 1", "2000:2", "30 dB", "0.001", "0.1 %", "1e-3"])
def test_an_extinction_ratio_may_be_written_in_many_ways(text: str) -> None:
    assert parse_quantity(text, "ratio") == pytest.approx(1e-3, rel=1e-12)


@given(ratio=st.floats(min_value=1e-9, max_value=1.0))
@settings(deadline=None)
def test_decibels_and_proportions_agree(ratio: float) -> None:
    decibels, proportion = -10.0 * math.log10(ratio), 1.0 / ratio

    by_decibels = parse_quantity(f"{abs(decibels)!r} dB", "ratio")
    by_proportion = parse_quantity(f"{proportion!r}:1", "ratio")

    assert by_decibels == pytest.approx(by_proportion, rel=1e-9)


def test_a_retardance_in_nanometres_is_divided_by_the_wavelength() -> None:
    assert parse_quantity("392.6 nm", "retardance", wavelength_m=785.2e-9) == pytest.approx(0.5)


def test_a_retardance_in_nanometres_without_a_wavelength_is_refused() -> None:
    error = refusal("392.6 nm", "retardance")

    assert error.what == "a retardance in nm needs the wavelength of the light"
    assert error.expected == "one of the units waves, wave, deg, rad"


@pytest.mark.parametrize(
    ("text", "kind", "what", "nearest"),
    [
        ("5", "power", "'5' has no unit", "5 mW"),
        ("5mW", "power", "'5mW' has no space before its unit", "5 mW"),
        ("45°", "angle", "'45°' has no space before its unit", "45 °"),
        ("5 MW", "power", "'MW' is not a unit of a power", "5 mW"),
        ("5 degree", "angle", "'degree' is not a unit of an angle", "5 deg"),
        ("5 mA", "power", "'mA' is not a unit of a power", ""),
        ("5,0 mW", "power", "'5,0 mW' has a comma", "5.0 mW"),
        ("1,000 nm", "length", "'1,000 nm' has a comma", ""),
        ("1,000.5 nm", "length", "'1,000.5 nm' has a comma", ""),
        ("nan", "power", "'nan' is not a finite number", ""),
        ("NaN W", "power", "'NaN W' is not a finite number", ""),
        (".inf W", "power", "'.inf W' is not a finite number", ""),
        ("-inf mW", "power", "'-inf mW' is not a finite number", ""),
        ("1e999 W", "power", "the number in '1e999 W' is too large", ""),
        ("1e308 h", "time", "1e+308 h is too large", ""),
        ("", "power", "nothing is written here", ""),
        ("much", "power", "'much' is not a quantity", ""),
        ("5 mW please", "power", "'5 mW please' is not a quantity", ""),
        ("1_000 W", "power", "'1_000 W' is not a quantity", ""),
        ("0x10 W", "power", "'0x10 W' is not a quantity", ""),
        ("١ W", "power", "'١ W' is not a quantity", ""),
        ("2**99**99 W", "power", "'2**99**99 W' is not a quantity", ""),
        ("1000", "ratio", "a ratio of 1000 is not between 0 and 1", "1000:1"),
        ("-3 dB", "ratio", "a ratio of -3 dB is not between 0 and 1", ""),
        ("300 %", "ratio", "a ratio of 300 % is not between 0 and 1", ""),
        ("1:0", "ratio", "both numbers of '1:0' must be above zero", ""),
        ("-1:5", "ratio", "both numbers of '-1:5' must be above zero", ""),
        ("1e308:1e-308", "ratio", "both numbers of '1e308:1e-308' must be above zero", ""),
        ("0", "count", "0 is not a whole number above zero", ""),
        ("2.5 readings", "count", "2.5 is not a whole number above zero", ""),
        ("2 %", "number", "'%' is not a unit of a number", ""),
        ("-5 s", "time", "a time of -5 s is negative", ""),
        ("0 nm", "length", "a length of 0 nm is not above zero", ""),
        ("0 deg/s", "angular speed", "an angular speed of 0 deg/s is not above zero", ""),
    ],
)
def test_what_is_no_quantity_is_refused_with_the_nearest_that_is(text: str, kind: str, what: str, nearest: str) -> None:
    error = refusal(text, kind)

    assert (error.what, error.nearest) == (what, nearest)
    assert error.expected


def test_a_missing_unit_names_the_units_there_are() -> None:
    assert refusal("5", "power").expected == "one of the units W, mW, uW, nW, pW"


def test_a_refusal_shown_alone_says_what_to_write() -> None:
    expected = "'5' has no unit\n  Expected one of the units m, mm, nm, um; did you mean '5 nm'?"

    assert str(refusal("5", "length")) == expected


@pytest.mark.parametrize("parse", [parse_quantity, parse_measured, parse_span])
def test_a_very_long_text_is_refused_before_it_is_searched(parse: Callable[[str, str], object]) -> None:
    with pytest.raises(QuantityError, match="100000 characters are no quantity"):
        parse("1" * 100_000, "power")


@given(text=st.text(), kind=st.sampled_from(sorted(KINDS)))
@settings(deadline=None)
def test_any_text_is_a_finite_number_or_a_refusal(text: str, kind: str) -> None:
    try:
        value = parse_quantity(text, kind)
    except QuantityError:
        return

    assert math.isfinite(value)


SHAPED = st.from_regex(r"[-+0-9.e,:a-zA-Z% ()=k±/²°]{0,40}", fullmatch=True)


@given(text=SHAPED, kind=st.sampled_from(sorted(KINDS)))
@settings(deadline=None)
def test_any_text_that_looks_like_a_measured_value_is_one_or_a_refusal(text: str, kind: str) -> None:
    try:
        measured = parse_measured(text, kind, wavelength_m=500e-9)
    except QuantityError:
        return

    assert math.isfinite(measured.value)
    assert measured.u is None or 0 < measured.u < math.inf


@pytest.mark.parametrize("sign", ["+-", "±", "+/-"])
def test_a_value_may_carry_its_standard_uncertainty(sign: str) -> None:
    measured = parse_measured(f"785.2 nm {sign} 0.3 nm", "length")

    assert measured == Measured(785.2e-9, 0.3e-9)


@pytest.mark.parametrize(
    ("text", "kind", "u"),
    [
        ("2 mW +- 30 %", "power", 0.6e-3),
        ("2 mW +- 100 uW", "power", 0.1e-3),
        ("-2 deg +- 10 %", "angle", 0.2),
        ("100000:1 +- 30 %", "ratio", 0.3e-5),
        ("0.001 +- 0.0002", "ratio", 0.2e-3),
        ("785.2 nm +- 0.6 nm (k=2)", "length", 0.3e-9),
        ("785.2 nm +- 0.6 nm ( k = 2 )", "length", 0.3e-9),
        ("2 mW +- 60 % (k=2)", "power", 0.6e-3),
        ("0.5 waves +- 3.6 deg", "retardance", 0.01),
    ],
)
def test_an_uncertainty_may_be_relative_or_expanded(text: str, kind: str, u: float) -> None:
    assert parse_measured(text, kind).u == pytest.approx(u, rel=1e-12)


def test_a_value_without_uncertainty_has_none() -> None:
    assert parse_measured("0 deg", "angle") == Measured(0.0, None)


@given(decibels=st.floats(min_value=1.0, max_value=60.0), u=st.floats(min_value=1e-3, max_value=1.0))
@settings(deadline=None)
def test_an_uncertainty_in_decibels_is_the_slope_times_it(decibels: float, u: float) -> None:
    step = 1e-6
    beside = parse_quantity(f"{decibels - step!r} dB", "ratio") - parse_quantity(f"{decibels!r} dB", "ratio")

    measured = parse_measured(f"{decibels!r} dB +- {u!r} dB", "ratio")

    assert measured.u == pytest.approx(beside / step * u, rel=1e-3)


def test_an_uncertainty_in_nanometres_of_a_retardance_is_divided_by_the_wavelength() -> None:
    measured = parse_measured("250 nm +- 5 nm", "retardance", wavelength_m=500e-9)

    assert measured == Measured(0.5, 0.01)


@pytest.mark.parametrize(
    ("text", "kind", "what"),
    [
        ("785.2 +- 0.3 nm", "length", "'785.2' has no unit"),
        ("785.2 nm +- 0.3", "length", "'0.3' has no unit"),
        ("5 mW +-", "power", "'5 mW +-' is not a value and its uncertainty"),
        ("+- 5 mW", "power", "'+- 5 mW' is not a value and its uncertainty"),
        ("5 W +- 1 W +- 2 W", "power", "'5 W +- 1 W +- 2 W' is not a value and its uncertainty"),
        ("0 deg +- 30 %", "angle", "the uncertainty in '0 deg +- 30 %' is not positive"),
        ("5 deg +- -1 deg", "angle", "the uncertainty in '5 deg +- -1 deg' is not positive"),
        ("5 deg +- 0 deg", "angle", "the uncertainty in '5 deg +- 0 deg' is not positive"),
        ("5 deg +- nan deg", "angle", "'nan deg' is not a finite number"),
        ("5 deg +- 1 deg (k=0)", "angle", "the coverage factor in '1 deg (k=0)' must be above zero"),
        ("5 deg +- 1 deg (k=two)", "angle", "'1 deg (k=two)' is not a quantity"),
        ("4 % +- 10 %", "ratio", "'+- 10 %' behind a value in % may mean two things"),
        ("1000:1 +- 100:1", "ratio", "'+- 100:1' is no uncertainty of a ratio"),
        ("5 deg +- 1 mm", "angle", "'mm' is not a unit of an angle"),
    ],
)
def test_what_is_no_uncertainty_is_refused(text: str, kind: str, what: str) -> None:
    with pytest.raises(QuantityError) as caught:
        parse_measured(text, kind)

    assert caught.value.what == what


@pytest.mark.parametrize(
    ("text", "ends"),
    [
        ("0 deg to 90 deg", (0.0, 90.0)),
        ("-3600 to 3600 deg", (-3600.0, 3600.0)),
        ("0 deg to 1 rad", (0.0, math.degrees(1.0))),
    ],
)
def test_a_span_has_two_ends_that_may_share_a_unit(text: str, ends: tuple[float, float]) -> None:
    assert parse_span(text, "angle") == pytest.approx(ends)


@pytest.mark.parametrize(
    ("text", "what"),
    [
        ("5 deg", "'5 deg' is not a span"),
        ("1 to 2 to 3 deg", "'1 to 2 to 3 deg' is not a span"),
        ("5 to 3 deg", "the span '5 to 3 deg' does not go up"),
        ("5 deg to 5 deg", "the span '5 deg to 5 deg' does not go up"),
        ("0 to 90", "'90' has no unit"),
        ("0 deg to 90", "'90' has no unit"),
    ],
)
def test_what_is_no_span_is_refused(text: str, what: str) -> None:
    with pytest.raises(QuantityError) as caught:
        parse_span(text, "angle")

    assert caught.value.what == what


@pytest.mark.parametrize(
    ("value", "kind", "text"),
    [
        (785.2e-9, "length", "785.2 nm"),
        (2e-3, "power", "2 mW"),
        (-4e-9, "power", "-4 nW"),
        (3e-15, "power", "0.003 pW"),
        (0.0, "power", "0 W"),
        (0.15, "time", "150 ms"),
        (900.0, "time", "15 min"),
        (1e-3, "ratio", "1000:1"),
        (1e-7, "ratio", "10000000:1"),
        (0.5, "ratio", "0.5"),
        (0.005, "drift", "0.5 %/h"),
        (12345.678, "angle", "12345.7 deg"),
        (4.0, "count", "4"),
        (22.0, "temperature", "22 degC"),
        (-5.5, "temperature", "-5.5 degC"),
        (0.7, "temperature difference", "0.7 K"),
        (0.01 / 60, "temperature slope", "0.01 K/min"),
        (0.034, "current", "34 mA"),
        (25e-6, "current", "25 uA"),
        (1.5, "current", "1.5 A"),
        (5e-3, "current slope", "5 mA/s"),
        (2.5, "voltage", "2.5 V"),
        (0.3, "voltage", "300 mV"),
        (1e4, "resistance", "10 kohm"),
        (470.0, "resistance", "470 ohm"),
        (-1e-4, "coefficient", "-100 ppm/K"),
        (50.0, "frequency", "50 Hz"),
        (1200.0, "frequency", "1.2 kHz"),
    ],
)
def test_a_value_is_shown_in_the_unit_that_suits_its_size(value: float, kind: str, text: str) -> None:
    assert format_quantity(value, kind) == text


def test_fewer_digits_can_be_asked_for() -> None:
    assert format_quantity(785.234e-9, "length", digits=3) == "785 nm"


@given(kind=st.sampled_from(sorted(KINDS)), size=positive, is_negative=st.booleans())
@settings(deadline=None)
def test_what_is_shown_is_read_back(kind: str, size: float, is_negative: bool) -> None:
    may_be_negative = KINDS[kind].sign == "any" and kind not in ("ratio", "count")
    value = -size if is_negative and may_be_negative else size
    assume(value >= KINDS[kind].least)
    assume(kind != "ratio" or value <= 1.0)
    assume(kind != "count" or value >= 1.0)
    value = float(round(value)) if kind == "count" else value

    assert parse_quantity(format_quantity(value, kind, digits=9), kind) == pytest.approx(value, rel=1e-8)
