"""Thermistors against published tables, and the constants as people write them."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from rigctl.errors import QuantityError
from rigctl.thermistor import Beta, SteinhartHart, Thermistor, parse_thermistor

TEN_KOHM = SteinhartHart(1.12924e-3, 2.34108e-4, 0.87755e-7)
"""The most common curve of 10 kOhm at 25 degC, as a public chart gives its constants."""

TABLE = [
    (-40.0, 336103.2),
    (-20.0, 97006.9),
    (-10.0, 55303.9),
    (0.0, 32650.9),
    (1.0, 31030.8),
    (20.0, 12490.0),
    (25.0, 10000.0),
    (30.0, 8057.0),
    (55.0, 2986.0),
    (60.0, 2488.0),
    (65.0, 2083.0),
    (90.0, 917.7),
    (95.0, 788.5),
    (100.0, 680.0),
]
"""Rows of that curve that three independent public documents print, degC and ohm."""

SENSORS = [TEN_KOHM, SteinhartHart(1.0e-3, 2.5e-4, 0.0), Beta(10e3, 25.0, 3976.0), Beta(100e3, 20.0, 4250.0)]
sensors = st.sampled_from(SENSORS)


@pytest.mark.parametrize(("temperature_c", "resistance_ohm"), TABLE)
def test_the_curve_goes_through_the_published_table(temperature_c: float, resistance_ohm: float) -> None:
    allowed_k = 0.01 if 0.0 <= temperature_c <= 60.0 else 0.1

    assert TEN_KOHM.temperature_c(resistance_ohm) == pytest.approx(temperature_c, abs=allowed_k)


@pytest.mark.parametrize(("temperature_c", "resistance_ohm"), [(20.0, 12493.17), (20.9, 11996.62), (25.0, 9999.91)])
def test_the_curve_turned_round_gives_the_published_resistances(temperature_c: float, resistance_ohm: float) -> None:
    assert TEN_KOHM.resistance_ohm(temperature_c) == pytest.approx(resistance_ohm, abs=0.005)


def test_constants_solved_from_three_rows_agree_between_them() -> None:
    solved = SteinhartHart(1.12749179e-3, 2.34379284e-4, 8.67915264e-8)

    for temperature_c, resistance_ohm in ((0.0, 32650.9), (25.0, 10000.0), (60.0, 2488.0)):
        assert solved.temperature_c(resistance_ohm) == pytest.approx(temperature_c, abs=1e-5)
    assert solved.temperature_c(12e3) == pytest.approx(20.8936, abs=5e-5)


@pytest.mark.parametrize(
    ("beta_k", "temperature_c"), [(3977.0, 20.98), (3950.0, 20.95), (3435.0, 20.36), (3380.0, 20.28)]
)
def test_parts_of_one_nominal_resistance_differ_by_more_than_half_a_kelvin(beta_k: float, temperature_c: float) -> None:
    assert Beta(10e3, 25.0, beta_k).temperature_c(12e3) == pytest.approx(temperature_c, abs=0.005)


def test_the_slope_is_the_published_one() -> None:
    warmer, colder = TEN_KOHM.temperature_c(12e3 + 0.5), TEN_KOHM.temperature_c(12e3 - 0.5)

    assert warmer - colder == pytest.approx(-1.854e-3, abs=1e-6)


def test_a_beta_sensor_has_its_own_resistance_at_its_own_temperature() -> None:
    sensor = Beta(10e3, 25.0, 3976.0)

    assert sensor.resistance_ohm(25.0) == 10e3
    assert sensor.temperature_c(10e3) == pytest.approx(25.0, abs=1e-12)


@given(sensor=sensors, temperature_c=st.floats(-60.0, 200.0))
def test_a_resistance_leads_back_to_its_temperature(sensor: Thermistor, temperature_c: float) -> None:
    assert sensor.temperature_c(sensor.resistance_ohm(temperature_c)) == pytest.approx(temperature_c, abs=1e-9)


@given(b=st.floats(1e-4, 5e-4), c=st.floats(0.0, 1e-6), temperature_c=st.floats(-60.0, 200.0))
def test_the_curve_can_be_turned_round_however_small_its_cubic_part_is(
    b: float, c: float, temperature_c: float
) -> None:
    sensor = SteinhartHart(1.1e-3, b, c)

    assert sensor.temperature_c(sensor.resistance_ohm(temperature_c)) == pytest.approx(temperature_c, abs=1e-8)


def test_a_long_text_is_refused_before_it_is_searched() -> None:
    with pytest.raises(QuantityError):
        parse_thermistor("beta 3976 K, " + "10 kOhm at " * 100_000 + "25 degC")


@given(sensor=sensors, ohm=st.floats(1e-3, 1e9), more=st.floats(1.001, 1e3))
def test_more_resistance_is_never_warmer(sensor: Thermistor, ohm: float, more: float) -> None:
    assert sensor.temperature_c(ohm * more) <= sensor.temperature_c(ohm)


@pytest.mark.parametrize("sensor", SENSORS)
@pytest.mark.parametrize("resistance_ohm", [0.0, -1.0, 1e-9, math.nan])
def test_a_shorted_sensor_is_infinitely_hot_or_far_beyond_anything_real(
    sensor: Thermistor, resistance_ohm: float
) -> None:
    assert sensor.temperature_c(resistance_ohm) == math.inf


@pytest.mark.parametrize("sensor", SENSORS)
def test_an_open_sensor_is_as_cold_as_can_be(sensor: Thermistor) -> None:
    assert sensor.temperature_c(math.inf) == pytest.approx(-273.15)
    assert sensor.temperature_c(1e8) < -70.0


@pytest.mark.parametrize(
    ("text", "sensor"),
    [
        ("A 1.12924e-3, B 2.34108e-4, C 8.7755e-8", TEN_KOHM),
        ("A 0.00112924,B 0.000234108,C 0.87755E-7", TEN_KOHM),
        (" A 1.0e-3, B 2.5e-4, C 0 ", SteinhartHart(1.0e-3, 2.5e-4, 0.0)),
        ("A 1.0e-3, B 2.5e-4, C 1e-320", SteinhartHart(1.0e-3, 2.5e-4, 1e-320)),
        ("beta 3976 K, 10 kOhm at 25 degC", Beta(10e3, 25.0, 3976.0)),
        ("beta 3950 K, 10000 ohm at 298.15 K", Beta(10e3, 25.0, 3950.0)),
        ("beta 4250 K,100 kohm at 20 degC", Beta(100e3, 20.0, 4250.0)),
    ],
)
def test_constants_are_read_as_people_write_them(text: str, sensor: Thermistor) -> None:
    assert parse_thermistor(text) == sensor


@pytest.mark.parametrize("sensor", SENSORS)
def test_what_a_sensor_says_of_itself_is_read_back_as_the_same_sensor(sensor: Thermistor) -> None:
    assert parse_thermistor(str(sensor)) == sensor


@given(a=st.floats(1.0e-3, 1.2e-3), b=st.floats(2.2e-4, 2.4e-4), c=st.floats(5e-8, 2e-7))
def test_no_digit_of_a_constant_is_lost_in_writing(a: float, b: float, c: float) -> None:
    sensor = SteinhartHart(a, b, c)

    assert parse_thermistor(str(sensor)) == sensor


@pytest.mark.parametrize(
    "text",
    [
        "",
        "10 kOhm",
        "beta 3976",
        "1.12924e-3, 2.34108e-4, 8.7755e-8",
        "A 1.12924e-3, B 2.34108e-4",
        "B 2.34108e-4, A 1.12924e-3, C 8.7755e-8",
        "A 1.12924e-3, B 2.34108e-4, C 8.7755e-8, D 0",
        "A 1,12924e-3, B 2,34108e-4, C 8,7755e-8",
        "beta 3976 K, 10 kOhm",
        "beta 3976 K, 10 kOhm, 25 degC",
        "beta 3976 K, 10 kOhm " + "at" * 100_000 + " 25 degC",
    ],
)
def test_a_text_of_neither_form_is_refused_with_an_example_of_both(text: str) -> None:
    with pytest.raises(QuantityError, match="gives no constants of a thermistor") as caught:
        parse_thermistor(text)

    assert "beta 3976 K" in caught.value.expected
    assert len(caught.value.what) < 300


@pytest.mark.parametrize(
    ("text", "unit"),
    [
        ("beta 3976, 10 kOhm at 25 degC", "K"),
        ("beta 3976 K, 10000 at 25 degC", "kohm"),
        ("beta 3976 K, 10 kOhm at 25", "degC"),
        ("A 1.12924e-3 V, B 2.34108e-4, C 8.7755e-8", "number"),
    ],
)
def test_a_quantity_in_it_that_is_none_is_told_by_its_own_name(text: str, unit: str) -> None:
    with pytest.raises(QuantityError) as caught:
        parse_thermistor(text)

    assert unit in caught.value.expected


@pytest.mark.parametrize(
    "text",
    [
        "A 1.12924, B 0.234108, C 0.87755e-4",  # a table in thousandths
        "A 1.12924e-3, B 2.34108e-4, C 0.87755",
        "A 1.12924e-3, B 2.34108e-3, C 8.7755e-8",
        "A 1.12924e-3, B -2.34108e-4, C 8.7755e-8",
        "A 1.12924e-3, B 2.34108e-4, C -8.7755e-8",
        "A 1e-3, B 1e-300, C 0",
        "A 1e-3, B 1e-300, C 1e-300",
        "A 1e-3, B 2.5e-4, C 1e300",
        "A -1e300, B 2.5e-4, C 1e-8",
        "beta -3976 K, 10 kOhm at 25 degC",
        "beta 0 K, 10 kOhm at 25 degC",
        "beta 397.6 K, 10 kOhm at 25 degC",
        "beta 39760 K, 10 kOhm at 25 degC",
        "beta 3976 K, 10 kOhm at 0 K",
        "beta 3976 K, 10 kOhm at 1e-6 K",
        "beta 3976 K, 1 ohm at 25 degC",
        "beta 3976 K, 1e6 kOhm at 25 degC",
    ],
)
def test_constants_that_no_thermistor_has_are_refused(text: str) -> None:
    with pytest.raises(QuantityError, match="no thermistor has the constants"):
        parse_thermistor(text)
