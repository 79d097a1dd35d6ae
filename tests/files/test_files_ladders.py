"""Turns, ranges and values become angles; a step must divide what it is to fill."""

import itertools

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from pydantic_core import PydanticCustomError

from rigctl.files.ladders import MOST_VALUES, joined, nearest_steps, there_and_back, values_of
from rigctl.files.recipe import AxisKind


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


@pytest.mark.parametrize(
    ("kind", "span", "step", "values"),
    [
        ("temperature", (20.0, 21.0), 0.1, tuple(round(20 + 0.1 * i, 1) for i in range(11))),
        ("current", (0.0, 0.003), 0.001, (0.0, 0.001, 0.002, 0.003)),
        ("current", (0.0165, 0.017), 0.00025, (0.0165, 0.01675, 0.017)),
    ],
)
def test_temperatures_and_currents_are_the_numbers_that_people_would_write(
    kind: AxisKind, span: tuple[float, float], step: float, values: tuple[float, ...]
) -> None:
    assert values_of(kind, span=span, step=step) == values


def test_the_way_back_visits_the_point_of_return_once() -> None:
    assert there_and_back([0.0, 1.0, 2.0]) == (0.0, 1.0, 2.0, 1.0, 0.0)


def test_there_is_no_way_back_from_a_single_value() -> None:
    assert there_and_back([3.0]) == (3.0,)


def test_pieces_that_touch_share_a_value() -> None:
    assert joined([(0.0, 1.0), (1.0, 1.5, 2.0), (5.0,)]) == (0.0, 1.0, 1.5, 2.0, 5.0)


@given(pieces=st.lists(st.lists(st.integers(0, 3).map(float), min_size=1, max_size=4), min_size=1, max_size=4))
def test_pieces_lose_no_value_but_where_they_touch(pieces: list[list[float]]) -> None:
    touching = sum(a[-1] == b[0] for a, b in itertools.pairwise(pieces))

    values = joined(pieces)

    assert len(values) == sum(map(len, pieces)) - touching
    assert {*values} == {value for piece in pieces for value in piece}


@pytest.mark.parametrize(
    ("kind", "step", "what", "near"),
    [
        ("temperature", 0.7, "steps of 0.7 K do not divide the range of 10 K", "steps of 0.625 K or 1 K"),
        ("current", 0.0, "a step of 0 A leads nowhere", "a step above zero"),
        ("current", 1e-6, "steps of 1 uA make more than 100000 values", "larger steps"),
    ],
)
def test_steps_are_told_in_the_units_of_their_kind(kind: AxisKind, step: float, what: str, near: str) -> None:
    with pytest.raises(PydanticCustomError) as caught:
        values_of(kind, span=(0.0, 10.0), step=step)

    assert caught.value.context is not None
    assert (caught.value.context["what"], caught.value.context["expected"]) == (what, near)


def test_the_nearest_steps_of_a_current_are_whole_microamperes() -> None:
    assert nearest_steps(0.05, 0.007, "current") == pytest.approx((0.00625, 0.01))


@given(visits=st.integers(min_value=1, max_value=MOST_VALUES), turns=st.integers(min_value=1, max_value=5))
@settings(deadline=None)
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
