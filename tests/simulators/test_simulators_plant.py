"""A temperature as a function of time, against its differential equation and its closed form."""

import math
from itertools import pairwise

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rigctl_sim.plant import SETTLED, Plant, PlantMake

AMBIENT_C, TAU_S, SLEW, IDLE_S = 22.0, 4.0, 0.2, 60.0
KNEE_K = SLEW * TAU_S
MAKE = PlantMake(AMBIENT_C, TAU_S, SLEW, IDLE_S)


def regulated(goal_c: float, *, at_s: float = 10.0) -> Plant:
    plant = Plant(MAKE)
    plant.regulate(at_s, goal_c)
    return plant


def integrated(begin_c: float, goal_c: float, duration_s: float) -> float:
    """dT/dt = (goal - T)/tau held within the slew, in small steps of the classical Runge-Kutta method."""

    def slope(here_c: float) -> float:
        return min(max((goal_c - here_c) / TAU_S, -SLEW), SLEW)

    count = 4000
    step_s, here_c = duration_s / count, begin_c
    for _ in range(count):
        first = slope(here_c)
        second = slope(here_c + 0.5 * step_s * first)
        third = slope(here_c + 0.5 * step_s * second)
        here_c += step_s * (first + 2 * second + 2 * third + slope(here_c + step_s * third)) / 6
    return here_c


def test_it_begins_at_ambient_and_stays_there() -> None:
    plant = Plant(MAKE)

    assert [plant(instant) for instant in (-1.0, 0.0, 1e6)] == [AMBIENT_C] * 3
    assert plant.rests_from_s == -math.inf


@pytest.mark.parametrize("goal_c", [22.5, 25.0, 60.0, 21.5, 5.0])
@pytest.mark.parametrize("after_s", [0.5, 3.0, 20.0, 250.0])
def test_on_its_way_it_follows_its_equation(goal_c: float, after_s: float) -> None:
    found_c = regulated(goal_c)(10.0 + after_s)

    assert found_c == pytest.approx(integrated(AMBIENT_C, goal_c, after_s), abs=2e-4)


def test_a_small_gap_closes_as_an_exponential() -> None:
    plant = regulated(AMBIENT_C + 0.5)

    found = [AMBIENT_C + 0.5 - plant(10.0 + after_s) for after_s in (0.0, TAU_S, 3 * TAU_S)]

    assert found == pytest.approx([0.5, 0.5 / math.e, 0.5 / math.e**3], rel=1e-12)


def test_a_large_gap_is_first_crossed_at_the_slew() -> None:
    plant = regulated(AMBIENT_C + 10.0)

    crossed = [plant(10.0 + after_s) - AMBIENT_C for after_s in (1.0, 10.0, 45.0)]

    assert crossed == pytest.approx([SLEW * 1.0, SLEW * 10.0, SLEW * 45.0], rel=1e-12)


def test_the_straight_line_ends_where_the_slope_of_the_exponential_is_the_slew() -> None:
    plant = regulated(AMBIENT_C + 10.0)
    knee_s = 10.0 + (10.0 - KNEE_K) / SLEW

    slopes = [(plant(knee_s + side * 1e-4) - plant(knee_s)) / (side * 1e-4) for side in (-1, 1)]

    assert plant(knee_s) == pytest.approx(AMBIENT_C + 10.0 - KNEE_K, abs=1e-9)
    assert slopes == pytest.approx([SLEW, SLEW], rel=1e-4)


def test_before_it_is_regulated_nothing_has_changed() -> None:
    assert regulated(40.0)(9.999) == AMBIENT_C


def test_at_last_it_is_exactly_where_it_was_wanted() -> None:
    plant = regulated(40.0)

    assert plant(plant.rests_from_s) == 40.0
    assert plant(plant.rests_from_s - 1e-6) == pytest.approx(40.0, abs=KNEE_K * 2 * math.exp(-SETTLED))


def test_another_goal_on_the_way_goes_on_from_there() -> None:
    plant = regulated(40.0)
    here_c = plant(30.0)

    plant.regulate(30.0, 20.0)

    assert plant(30.0) == here_c
    assert plant(35.0) == pytest.approx(here_c - 5.0 * SLEW, rel=1e-12)
    assert plant(1e4) == 20.0


def test_what_lies_behind_never_changes() -> None:
    plant = regulated(40.0)
    instants = [0.0, 12.0, 20.0, 29.0]
    before = [plant(instant) for instant in instants]

    plant.regulate(30.0, 5.0)
    plant.leave(50.0)

    assert [plant(instant) for instant in instants] == before


def test_the_same_goal_again_changes_nothing() -> None:
    plant = regulated(25.0)
    rests_from_s = plant.rests_from_s

    plant.regulate(rests_from_s + 5.0, 25.0)

    assert plant.rests_from_s == rests_from_s


def test_left_alone_it_goes_back_to_ambient() -> None:
    plant = regulated(40.0)

    plant.leave(1000.0)

    left = [plant(1000.0 + after_s) - AMBIENT_C for after_s in (0.0, IDLE_S, 2 * IDLE_S)]
    assert left == pytest.approx([18.0, 18.0 / math.e, 18.0 / math.e**2], rel=1e-9)
    assert plant(1e6) == AMBIENT_C


def test_left_alone_at_ambient_it_stays_at_rest() -> None:
    plant = Plant(MAKE)

    plant.leave(5.0)

    assert plant.rests_from_s == -math.inf


def test_what_fails_goes_back_to_ambient_from_that_instant_on() -> None:
    plant = Plant(MAKE, fails_at_s=500.0)
    plant.regulate(10.0, 40.0)

    assert plant(499.9) == pytest.approx(40.0, abs=1e-9)
    assert plant(500.0 + IDLE_S) - AMBIENT_C == pytest.approx(18.0 / math.e, rel=1e-9)


def test_what_has_failed_cannot_be_regulated_or_left() -> None:
    plant = Plant(MAKE, fails_at_s=500.0)
    plant.regulate(10.0, 40.0)
    expected = plant(700.0)

    plant.regulate(600.0, 60.0)
    plant.leave(650.0)

    assert plant(700.0) == expected


@pytest.mark.parametrize("told_s", [100.0, 499.0])
def test_a_goal_given_before_it_fails_does_not_save_it(told_s: float) -> None:
    plant = Plant(MAKE, fails_at_s=500.0)

    plant.regulate(told_s, 30.0)

    assert plant(1e6) == AMBIENT_C


@settings(deadline=None)
@given(
    goals=st.lists(st.floats(0.0, 80.0), min_size=1, max_size=6),
    pause_s=st.floats(0.1, 200.0),
)
def test_it_never_jumps_never_outruns_its_slew_and_never_overshoots(goals: list[float], pause_s: float) -> None:
    plant = Plant(MAKE)
    for number, goal_c in enumerate(goals):
        plant.regulate((number + 1) * pause_s, goal_c)
    instants = [0.01 * number * pause_s for number in range(100 * (len(goals) + 2))]

    temperatures = [plant(instant) for instant in instants]

    steps = [abs(after - before) for before, after in pairwise(temperatures)]
    assert max(steps) <= SLEW * 0.01 * pause_s * (1 + 1e-6) + 1e-9
    lowest, highest = min(AMBIENT_C, *goals), max(AMBIENT_C, *goals)
    assert lowest - 1e-9 <= min(temperatures) <= max(temperatures) <= highest + 1e-9
