"""The laser diode against the closed form, and against published and derived check values."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from rigctl_sim.diode import Diode, Load

POWER_W, CURRENT_A, TEMPERATURE_C = 10.458e-3, 34e-3, 25.0
THRESHOLD_A, CHARACTERISTIC_K = 17.4e-3, 128.0
SLOPE_W_PER_A = 0.63

currents = st.floats(0.0, 0.2)
temperatures = st.floats(-20.0, 80.0)


def make_diode(power_w: float = POWER_W) -> Diode:
    return Diode(power_w, CURRENT_A, TEMPERATURE_C, THRESHOLD_A, CHARACTERISTIC_K)


def test_it_has_its_power_where_it_is_prepared() -> None:
    assert make_diode().power_at(CURRENT_A, TEMPERATURE_C) == pytest.approx(POWER_W, rel=1e-15)


@pytest.mark.parametrize(("temperature_c", "threshold_ma"), [(20.0, 16.7334), (25.0, 17.4), (30.0, 18.0931)])
def test_the_threshold_grows_exponentially_with_temperature(temperature_c: float, threshold_ma: float) -> None:
    """Three temperatures of a worked example with a characteristic temperature of 128.0 K."""
    assert 1e3 * make_diode().threshold_at(temperature_c) == pytest.approx(threshold_ma, abs=5e-5)


def test_the_characteristic_temperature_is_found_from_two_thresholds() -> None:
    diode = make_diode()

    ratio = diode.threshold_at(30.0) / diode.threshold_at(20.0)

    assert 10.0 / math.log(ratio) == pytest.approx(CHARACTERISTIC_K, rel=1e-12)


@pytest.mark.parametrize("current_a", [0.0, 1e-3, THRESHOLD_A - 1e-9, THRESHOLD_A])
def test_below_threshold_it_is_dark(current_a: float) -> None:
    assert make_diode().power_at(current_a, TEMPERATURE_C) == 0.0


@pytest.mark.parametrize("current_a", [17.5e-3, 20e-3, 34e-3, 60e-3])
def test_above_threshold_power_is_the_slope_times_the_current_beyond_it(current_a: float) -> None:
    power_w = make_diode().power_at(current_a, TEMPERATURE_C)

    assert power_w == pytest.approx(SLOPE_W_PER_A * (current_a - THRESHOLD_A), rel=1e-12)


def test_one_percent_of_current_is_two_percent_of_power() -> None:
    """Sensitivity I/(I - Ith): 34/16.6 = 2.05 % for each percent of the drive."""
    diode = make_diode()

    change = diode.power_at(1.01 * CURRENT_A, TEMPERATURE_C) / POWER_W - 1.0

    assert change == pytest.approx(0.01 * 34.0 / 16.6, rel=1e-9)


def test_warmth_costs_power() -> None:
    """The threshold's rise of 3.98 % from 25 to 30 degC, times the slope."""
    lost_w = POWER_W - make_diode().power_at(CURRENT_A, 30.0)

    assert lost_w == pytest.approx(SLOPE_W_PER_A * THRESHOLD_A * 0.0398, rel=1e-3)


def test_a_cold_diode_emits_where_a_warm_one_is_dark() -> None:
    diode = make_diode()

    assert diode.power_at(17.0e-3, 20.0) > 0.0
    assert diode.power_at(17.0e-3, 30.0) == 0.0


@given(power_w=st.floats(1e-6, 1.0), current_a=currents, temperature_c=temperatures)
def test_everything_scales_with_its_power(power_w: float, current_a: float, temperature_c: float) -> None:
    one, scaled = make_diode(1.0), make_diode(power_w)

    expected_w = power_w * one.power_at(current_a, temperature_c)

    assert scaled.power_at(current_a, temperature_c) == pytest.approx(expected_w, rel=1e-12, abs=1e-300)


@given(low_a=currents, high_a=currents, temperature_c=temperatures)
def test_more_current_is_never_less_light(low_a: float, high_a: float, temperature_c: float) -> None:
    diode, (low_a, high_a) = make_diode(), sorted((low_a, high_a))

    assert diode.power_at(low_a, temperature_c) <= diode.power_at(high_a, temperature_c)


@given(current_a=currents, low_c=temperatures, high_c=temperatures)
def test_more_warmth_is_never_more_light(current_a: float, low_c: float, high_c: float) -> None:
    diode, (low_c, high_c) = make_diode(), sorted((low_c, high_c))

    assert diode.power_at(current_a, high_c) <= diode.power_at(current_a, low_c)


@given(current_a=currents, temperature_c=temperatures)
def test_light_is_never_negative(current_a: float, temperature_c: float) -> None:
    assert make_diode().power_at(current_a, temperature_c) >= 0.0


def test_the_voltage_is_a_straight_line_from_its_turn_on() -> None:
    load = Load(turn_on_v=1.5, series_ohm=5.0)

    assert [load.voltage_at(current_a) for current_a in (0.01, 0.034, 0.1)] == pytest.approx([1.55, 1.67, 2.0])


def test_without_current_there_is_no_voltage() -> None:
    assert Load(turn_on_v=1.5, series_ohm=5.0).voltage_at(0.0) == 0.0
