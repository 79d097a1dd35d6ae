"""Turns, ranges and values become angles; a step must divide what it is to fill."""

import pytest
from hypothesis import given
from hypothesis import strategies as st
from pydantic_core import PydanticCustomError

from rigctl.files.ladders import MOST_VALUES, nearest_steps, values_of


def turn(turns: float, step: float, start: float | None = None) -> tuple[float, ...]:
    return values_of("angle", turn=turns, step=step, start=start)


def reach(low: float, high: float, step: float) -> tuple[float, ...]:
    return values_of("angle", span=(low, high), step=step)


def test_a_turn_leaves_its_end_out() -> None:
    angles = turn(1, 5.0)

    assert (len(angles), angles[0], angles[-1]) == (72, 0.0, 355.0)


def test_a_turn_may_start_anywhere_and_go_round_more_than_once() -> None:
    assert turn(2, 180.0, start=-10.0) == (-10.0, 170.0, 350.0, 530.0)


def test_half_a_turn_is_a_turn_too() -> None:
    assert turn(0.5, 45.0) == (0.0, 45.0, 90.0, 135.0)


def test_a_range_holds_both_ends() -> None:
    assert reach(-10.0, 10.0, 5.0) == (-10.0, -5.0, 0.0, 5.0, 10.0)


def test_angles_are_the_numbers_that_people_would_write() -> None:
    assert reach(0.0, 0.5, 0.1) == (0.0, 0.1, 0.2, 0.3, 0.4, 0.5)


def test_values_keep_their_order_and_may_repeat() -> None:
    values = [3.0, 1.0, 3.0]

    assert values_of("angle", values=values) == (3.0, 1.0, 3.0)


@given(visits=st.integers(min_value=1, max_value=MOST_VALUES), turns=st.integers(min_value=1, max_value=5))
def test_any_whole_number_of_visits_makes_a_turn(visits: int, turns: int) -> None:
    angles = turn(turns, 360.0 * turns / visits)

    assert len(angles) == visits
    assert 0.0 <= min(angles) <= max(angles) < 360.0 * turns


@pytest.mark.parametrize(
    ("length", "step", "near"),
    [
        (360.0, 7.0, (6.0, 7.2)),
        (360.0, 13.0, (12.0, 14.4)),
        (360.0, 361.0, (360.0,)),
        (360.0, 0.0007, (0.001,)),
        (90.0, 7.0, (6.0, 7.5)),
        (0.00015, 0.0001, (0.000075, 0.00015)),
    ],
)
def test_the_nearest_steps_that_divide_are_short_numbers_where_there_are_such(
    length: float, step: float, near: tuple[float, ...]
) -> None:
    assert nearest_steps(length, step, "angle") == pytest.approx(near)


@given(step=st.floats(min_value=0.01, max_value=400.0))
def test_a_step_that_is_refused_comes_with_one_that_is_not(step: float) -> None:
    try:
        turn(1, step)
    except PydanticCustomError:
        for near in nearest_steps(360.0, step, "angle"):
            assert len(turn(1, near)) * near == pytest.approx(360.0)
