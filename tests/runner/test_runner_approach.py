import pytest
from hypothesis import given
from hypothesis import strategies as st

from rigctl.runner.approach import Approach, Standing, way_to, waypoints

angles = st.floats(-720, 720).map(lambda value: round(value, 3))


def test_the_first_visit_overshoots_by_twice_the_backlash() -> None:
    assert waypoints(None, 45.0, "from below", backlash_deg=0.1) == pytest.approx((44.8, 45.0))


def test_going_up_needs_no_overshoot_from_below() -> None:
    assert waypoints(40.0, 45.0, "from below", backlash_deg=0.1) == (45.0,)


def test_the_return_to_the_start_overshoots() -> None:
    assert waypoints(355.0, 0.0, "from below", backlash_deg=0.1) == pytest.approx((-0.2, 0.0))


def test_from_above_is_the_mirror_image() -> None:
    assert waypoints(40.0, 45.0, "from above", backlash_deg=0.1) == pytest.approx((45.2, 45.0))
    assert waypoints(50.0, 45.0, "from above", backlash_deg=0.1) == (45.0,)


def test_either_side_goes_straight() -> None:
    assert waypoints(None, 45.0, "either", backlash_deg=0.1) == (45.0,)


@given(st.none() | angles, angles, st.sampled_from(["from below", "from above"]), st.floats(0.001, 5.0))
def test_the_last_move_always_comes_from_the_wanted_side(
    last: float | None, target: float, approach: Approach, backlash: float
) -> None:
    way = waypoints(last, target, approach, backlash_deg=backlash)

    before = way[-2] if len(way) > 1 else last
    assert way[-1] == target
    assert before is not None
    assert (target - before > 0) == (approach == "from below")


def test_a_mount_that_stands_there_and_came_the_same_way_does_not_move() -> None:
    assert way_to(45.0, "from below", standing=Standing(45.0, "from below"), backlash_deg=0.1) == ()


def test_a_mount_that_came_from_the_other_side_starts_from_the_far_side() -> None:
    """Its gear lies on the other flank: neither standing still nor a small move would take the play out."""
    came_from_below = Standing(45.0, "from below")

    for target in (45.0, 44.95):
        way = way_to(target, "from above", standing=came_from_below, backlash_deg=0.1)
        assert way == pytest.approx((target + 0.2, target))
