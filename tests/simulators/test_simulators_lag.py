"""The first-order lag against closed forms and against an integration step by step."""

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.integrate import solve_ivp

from rigctl_sim.lag import respond

TAU = 0.05
powers = st.floats(0.0, 1.0)


def ramp(begin: float, end: float) -> tuple[float, float, float]:
    return begin, 0.5 * (begin + end), end


def test_a_step_is_followed_exponentially() -> None:
    shown, energy = respond(0.2, (1.0, 1.0, 1.0), duration_s=0.1, time_constant_s=TAU)

    assert shown == pytest.approx(1.0 - 0.8 * math.exp(-0.1 / TAU), abs=1e-15)
    assert energy == pytest.approx(0.1 - 0.8 * TAU * (1.0 - math.exp(-0.1 / TAU)), abs=1e-15)


def test_a_long_ramp_is_followed_late_by_one_time_constant() -> None:
    shown, _ = respond(0.0, ramp(0.0, 40.0), duration_s=2.0, time_constant_s=TAU)

    assert shown == pytest.approx(40.0 - 20.0 * TAU, abs=1e-9)


def test_a_ramp_from_rest_has_its_closed_form() -> None:
    slope, duration = 3.0, 0.08

    shown, energy = respond(1.0, ramp(1.0, 1.0 + slope * duration), duration_s=duration, time_constant_s=TAU)

    decayed = math.exp(-duration / TAU)
    assert shown == pytest.approx(1.0 + slope * (duration - TAU * (1.0 - decayed)), abs=1e-14)
    late = slope * (duration**2 / 2 - TAU * duration + TAU**2 * (1.0 - decayed))
    assert energy == pytest.approx(duration + late, abs=1e-14)


@settings(deadline=None)
@given(shown=powers, begin=powers, middle=powers, end=powers, duration=st.floats(1e-3, 1.0))
def test_a_parabola_agrees_with_an_integration_step_by_step(
    shown: float, begin: float, middle: float, end: float, duration: float
) -> None:
    def light(u: float) -> float:
        return begin + ((4 * middle - 3 * begin - end) + 2 * (begin - 2 * middle + end) * u / duration) * u / duration

    def rate(u: float, y: np.ndarray) -> list[float]:
        return [(light(u) - float(y[0])) / TAU, float(y[0])]

    solved = solve_ivp(rate, (0.0, duration), [shown, 0.0], rtol=1e-10, atol=1e-12)

    expected = respond(shown, (begin, middle, end), duration_s=duration, time_constant_s=TAU)
    assert expected == pytest.approx((solved.y[0, -1], solved.y[1, -1]), abs=1e-8)


@settings(deadline=None)
@given(shown=powers, begin=powers, middle=powers, end=powers)
def test_two_halves_give_what_the_whole_gives(shown: float, begin: float, middle: float, end: float) -> None:
    def light(part: float) -> float:
        return begin + ((4 * middle - 3 * begin - end) + 2 * (begin - 2 * middle + end) * part) * part

    first = (begin, light(0.25), middle)
    second = (middle, light(0.75), end)
    half, first_j = respond(shown, first, duration_s=0.05, time_constant_s=TAU)
    after, second_j = respond(half, second, duration_s=0.05, time_constant_s=TAU)

    whole = respond(shown, (begin, middle, end), duration_s=0.1, time_constant_s=TAU)
    assert (after, first_j + second_j) == pytest.approx(whole, abs=1e-12)


def test_without_a_lag_the_light_itself_is_shown() -> None:
    shown, energy = respond(7.0, (1.0, 2.0, 3.0), duration_s=0.5, time_constant_s=0.0)

    assert shown == 3.0
    assert energy == pytest.approx(1.0)


@settings(deadline=None)
@given(shown=powers, level=powers, duration=st.floats(1e-4, 10.0))
def test_what_is_shown_lies_between_the_old_level_and_the_new(shown: float, level: float, duration: float) -> None:
    after, energy = respond(shown, (level, level, level), duration_s=duration, time_constant_s=TAU)

    low, high = sorted((shown, level))
    assert low - 1e-12 <= after <= high + 1e-12
    assert low - 1e-12 <= energy / duration <= high + 1e-12
