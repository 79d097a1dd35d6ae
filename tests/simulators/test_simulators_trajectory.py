"""Motion as a function of time against the closed forms of constant acceleration."""

import math

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rigctl.interfaces import StageCapabilities
from rigctl_sim.trajectory import Trajectory

SPEED, ACCELERATION = 20.0, 100.0
RAMP_S = SPEED / ACCELERATION
RAMP = 0.5 * SPEED * RAMP_S

distances = st.floats(1e-3, 1e4).flatmap(lambda size: st.sampled_from((size, -size)))
rates = st.floats(0.1, 500.0)


def moved(distance: float, *, start_s: float = 0.0) -> Trajectory:
    trajectory = Trajectory(0.0)
    trajectory.move(start_s, distance, speed=SPEED, acceleration=ACCELERATION)
    return trajectory


def test_it_rests_where_it_was_put_until_somebody_moves_it() -> None:
    trajectory = Trajectory(12.5)

    assert [trajectory(t) for t in (-1e6, 0.0, 1e6)] == [12.5, 12.5, 12.5]
    assert trajectory.speed(0.0) == 0.0
    assert trajectory.rests_from_s == -math.inf


def test_a_long_move_is_a_trapezoid() -> None:
    trajectory = moved(90.0, start_s=1.0)

    cruise_s = (90.0 - 2 * RAMP) / SPEED
    assert trajectory.rests_from_s == pytest.approx(1.0 + 2 * RAMP_S + cruise_s, abs=1e-12)
    assert trajectory(1.0) == 0.0
    assert trajectory(1.0 + RAMP_S / 2) == pytest.approx(RAMP / 4, abs=1e-12)
    assert trajectory(1.0 + RAMP_S) == pytest.approx(RAMP, abs=1e-12)
    assert trajectory(1.0 + RAMP_S + 1.5) == pytest.approx(RAMP + 1.5 * SPEED, abs=1e-12)
    assert trajectory(trajectory.rests_from_s - RAMP_S / 2) == pytest.approx(90.0 - RAMP / 4, abs=1e-12)
    assert trajectory(trajectory.rests_from_s) == 90.0


def test_the_speed_of_a_long_move_ramps_up_holds_and_ramps_down() -> None:
    trajectory = moved(90.0)

    instants = (RAMP_S / 4, RAMP_S, 2.0, trajectory.rests_from_s - RAMP_S / 4)
    expected = (SPEED / 4, SPEED, SPEED, SPEED / 4)
    assert [trajectory.speed(t) for t in instants] == pytest.approx(expected, abs=1e-9)


def test_a_short_move_never_reaches_the_speed() -> None:
    trajectory = moved(1.0)

    assert trajectory.rests_from_s == pytest.approx(2 * math.sqrt(1.0 / ACCELERATION), abs=1e-12)
    assert trajectory(trajectory.rests_from_s / 2) == pytest.approx(0.5, abs=1e-12)
    assert trajectory.speed(trajectory.rests_from_s / 2) == pytest.approx(math.sqrt(ACCELERATION), abs=1e-9)


def test_a_move_to_where_it_stands_takes_no_time() -> None:
    trajectory = moved(90.0)
    before_s = trajectory.rests_from_s

    ended_s = trajectory.move(50.0, 90.0, speed=SPEED, acceleration=ACCELERATION)

    assert ended_s == 50.0
    assert trajectory.rests_from_s == before_s


def test_moves_follow_one_another_without_a_jump() -> None:
    trajectory = moved(10.0)
    first_s = trajectory.rests_from_s

    trajectory.move(first_s, -30.0, speed=SPEED, acceleration=ACCELERATION)

    assert trajectory(first_s) == pytest.approx(10.0, abs=1e-12)
    assert trajectory(first_s / 2) == pytest.approx(5.0, abs=1e-12)
    assert trajectory(trajectory.rests_from_s) == -30.0


@settings(deadline=None)
@given(distance=distances, speed=rates, acceleration=rates)
def test_the_duration_is_what_a_driver_expects_of_such_a_mount(
    distance: float, speed: float, acceleration: float
) -> None:
    able = StageCapabilities((-1e5, 1e5), speed, acceleration, 0.0, 1e-3)
    trajectory = Trajectory(0.0)

    ended_s = trajectory.move(0.0, distance, speed=speed, acceleration=acceleration)

    assert ended_s == pytest.approx(able.travel_time_s(distance), rel=1e-9)


@settings(deadline=None)
@given(distance=distances, speed=rates, acceleration=rates, part=st.floats(0.0, 1.0))
def test_place_and_speed_are_continuous_and_bounded(
    distance: float, speed: float, acceleration: float, part: float
) -> None:
    trajectory = Trajectory(0.0)
    ended_s = trajectory.move(0.0, distance, speed=speed, acceleration=acceleration)

    instant = part * ended_s
    assert abs(trajectory.speed(instant)) <= speed * (1 + 1e-9)
    assert min(0.0, distance) - 1e-6 <= trajectory(instant) <= max(0.0, distance) + 1e-6
    for knot in trajectory.knots(0.0, ended_s):
        jump = trajectory(knot * (1 + 1e-12)) - trajectory(knot * (1 - 1e-12))
        assert abs(jump) <= 3e-12 * knot * speed + 1e-9 * abs(distance)


@settings(deadline=None)
@given(distance=distances, part=st.floats(0.0, 1.0))
def test_a_move_is_the_same_backwards_in_time(distance: float, part: float) -> None:
    trajectory = moved(distance)
    ended_s = trajectory.rests_from_s

    there, back = trajectory(part * ended_s), trajectory((1 - part) * ended_s)

    assert there + back == pytest.approx(distance, abs=1e-9 * abs(distance) + 1e-9)


def test_knots_are_the_instants_where_the_acceleration_changes() -> None:
    trajectory = moved(90.0, start_s=1.0)
    ended_s = trajectory.rests_from_s

    assert trajectory.knots(0.0, 100.0) == pytest.approx([1.0, 1.0 + RAMP_S, ended_s - RAMP_S, ended_s])
    assert trajectory.knots(1.0, ended_s) == pytest.approx([1.0 + RAMP_S, ended_s - RAMP_S])
    assert trajectory.knots(ended_s, 100.0) == []


def test_a_hold_while_cruising_stops_after_the_braking_distance() -> None:
    trajectory = moved(90.0)
    held_at = trajectory(2.0)

    rests_s = trajectory.hold(2.0, acceleration=ACCELERATION)

    assert rests_s == pytest.approx(2.0 + RAMP_S, abs=1e-12)
    assert trajectory(rests_s) == pytest.approx(held_at + RAMP, abs=1e-12)
    assert trajectory.rests_at == trajectory(1e6)


def test_a_hold_leaves_the_past_as_it_was() -> None:
    trajectory, untouched = moved(90.0), moved(90.0)

    trajectory.hold(2.0, acceleration=ACCELERATION)

    for instant in (0.0, 0.1, RAMP_S, 1.0, 1.999, 2.0):
        assert trajectory(instant) == untouched(instant)


def test_a_hold_on_the_way_back_brakes_the_other_way() -> None:
    trajectory = moved(-90.0)
    held_at = trajectory(2.0)

    trajectory.hold(2.0, acceleration=ACCELERATION)

    assert trajectory.rests_at == pytest.approx(held_at - RAMP, abs=1e-12)


def test_a_hold_at_rest_changes_nothing() -> None:
    trajectory = moved(90.0)

    assert trajectory.hold(100.0, acceleration=ACCELERATION) == 100.0
    assert trajectory.rests_at == 90.0


def test_a_second_hold_while_braking_brakes_no_harder() -> None:
    trajectory = moved(90.0)
    first_s = trajectory.hold(2.0, acceleration=ACCELERATION)

    second_s = trajectory.hold(2.0 + RAMP_S / 2, acceleration=ACCELERATION)

    assert second_s == pytest.approx(first_s, abs=1e-12)


def test_a_stop_forgets_what_was_ahead() -> None:
    trajectory = moved(90.0)
    here = trajectory(2.0)

    trajectory.stop(2.0)

    assert trajectory(5.0) == here
    assert trajectory.rests_from_s == 2.0


def test_a_glide_has_constant_speed() -> None:
    trajectory = Trajectory(0.0)

    ended_s = trajectory.glide(1.0, 1.0, 0.02)

    assert ended_s == 1.02
    assert trajectory(1.005) == pytest.approx(0.25, abs=1e-12)
    assert trajectory.speed(1.01) == pytest.approx(50.0)
    assert trajectory(2.0) == 1.0


def test_a_glide_may_turn_back_halfway() -> None:
    trajectory = Trajectory(0.0)
    trajectory.glide(0.0, 1.0, 0.02)

    trajectory.glide(0.01, 0.0, 0.02)

    assert trajectory(0.005) == pytest.approx(0.25)
    assert trajectory(0.01) == pytest.approx(0.5)
    assert trajectory(0.02) == pytest.approx(0.25)
    assert trajectory(1.0) == 0.0
