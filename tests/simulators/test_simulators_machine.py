"""The mechanics behind motion firmware: the queue, hold and resume, lost steps, homing."""

import math

import pytest

from rigctl_sim.machine import LOCATES_IN_S, MOST_PLANNED, Axis, AxisMake, Machine

MAKE = AxisMake((-360.0, 360.0), 20.0, 100.0, 0.001)
RAMP_S, RAMP_DEG = 0.2, 2.0
FAST = math.inf


def make_machine(*, left_at_deg: float = 0.0) -> Machine:
    return Machine({"A": Axis(MAKE, left_at_deg=left_at_deg)})


def duration_s(distance_deg: float) -> float:
    return distance_deg / 20.0 + RAMP_S


def test_moves_of_the_queue_follow_one_another() -> None:
    machine = make_machine()

    machine.plan(0.0, {"A": 40.0}, FAST)
    machine.plan(0.0, {"A": 0.0}, FAST)

    assert machine.done_from_s() == pytest.approx(2 * duration_s(40.0))
    assert machine.axes["A"].counted_deg(duration_s(40.0)) == pytest.approx(40.0)


def test_a_move_planned_late_starts_late() -> None:
    machine = make_machine()

    machine.plan(7.0, {"A": 40.0}, FAST)

    assert machine.axes["A"].counted_deg(7.0) == 0.0
    assert machine.done_from_s() == pytest.approx(7.0 + duration_s(40.0))


def test_a_feed_slower_than_the_axis_is_kept_and_a_faster_one_is_not() -> None:
    slow, fast = make_machine(), make_machine()

    slow.plan(0.0, {"A": 40.0}, 10.0)
    fast.plan(0.0, {"A": 40.0}, 1000.0)

    assert slow.done_from_s() == pytest.approx(40.0 / 10.0 + 0.1)
    assert fast.done_from_s() == pytest.approx(duration_s(40.0))


def test_a_target_is_rounded_to_a_step() -> None:
    machine = make_machine()

    machine.plan(0.0, {"A": 12.34567}, FAST)

    assert machine.axes["A"].counted_deg(100.0) == pytest.approx(12.346, abs=1e-12)


def test_the_axes_of_one_move_start_together_and_the_next_waits_for_the_slowest() -> None:
    machine = Machine({"A": Axis(MAKE), "B": Axis(MAKE)})

    machine.plan(0.0, {"A": 40.0, "B": 4.0}, FAST)
    machine.plan(0.0, {"B": 0.0}, FAST)

    turned_back_s = duration_s(40.0)
    assert machine.axes["B"].counted_deg(turned_back_s) == pytest.approx(4.0)
    assert machine.axes["B"].counted_deg(turned_back_s + 0.3) < 4.0


def test_the_queue_has_room_again_when_its_first_move_is_done() -> None:
    machine = make_machine()
    for number in range(MOST_PLANNED):
        assert machine.room_from_s(0.0) == 0.0
        machine.plan(0.0, {"A": 4.0 * (number + 1)}, FAST)

    assert machine.room(0.0) == 0
    assert machine.room_from_s(0.0) == pytest.approx(duration_s(4.0))
    assert machine.room(duration_s(4.0) + 1e-9) == 1


def test_targets_beyond_the_travel_are_seen() -> None:
    machine = make_machine()

    assert machine.is_within_travel({"A": 360.0})
    assert not machine.is_within_travel({"A": 360.001})


def test_a_held_machine_brakes_and_stays() -> None:
    machine = make_machine()
    machine.plan(0.0, {"A": 40.0}, FAST)

    machine.hold(1.0)

    here = RAMP_DEG + 0.8 * 20.0 + RAMP_DEG
    assert machine.axes["A"].counted_deg(50.0) == pytest.approx(here)
    assert machine.is_turning(1.1)
    assert not machine.is_turning(1.0 + RAMP_S + 1e-9)
    assert machine.done_from_s() == math.inf


def test_what_was_planned_goes_on_after_a_resume() -> None:
    machine = make_machine()
    machine.plan(0.0, {"A": 40.0}, FAST)
    machine.plan(0.0, {"A": 0.0}, FAST)
    machine.hold(1.0)

    machine.resume(10.0)

    left_deg = 40.0 - machine.axes["A"].counted_deg(10.0)
    assert machine.done_from_s() == pytest.approx(10.0 + duration_s(left_deg) + duration_s(40.0))
    assert machine.axes["A"].counted_deg(100.0) == 0.0


def test_a_resume_while_still_braking_waits_for_rest() -> None:
    machine = make_machine()
    machine.plan(0.0, {"A": 40.0}, FAST)
    machine.hold(1.0)

    machine.resume(1.05)

    assert machine.axes["A"].dial.speed(1.0 + RAMP_S) == pytest.approx(0.0, abs=1e-9)
    assert machine.axes["A"].counted_deg(100.0) == 40.0


def test_what_is_planned_while_held_waits_as_well() -> None:
    machine = make_machine()
    machine.hold(0.0)

    machine.plan(1.0, {"A": 40.0}, FAST)
    assert machine.axes["A"].counted_deg(50.0) == 0.0
    machine.resume(60.0)

    assert machine.axes["A"].counted_deg(100.0) == 40.0


def test_a_second_hold_and_a_resume_without_one_change_nothing() -> None:
    machine = make_machine()
    machine.resume(0.0)
    machine.plan(0.0, {"A": 40.0}, FAST)
    machine.hold(1.0)
    rests_s = machine.rests_from_s()

    machine.hold(1.1)

    assert machine.rests_from_s() == rests_s


def test_abandoning_at_rest_keeps_the_place() -> None:
    machine = make_machine()
    machine.plan(0.0, {"A": 40.0}, FAST)
    machine.hold(1.0)

    is_lost = machine.abandon(5.0)

    assert not is_lost
    assert machine.axes["A"].lost_deg == 0.0
    assert machine.done_from_s() <= 5.0
    assert machine.target_deg("A") == machine.axes["A"].counted_deg(5.0)


def test_abandoning_while_it_turns_loses_the_braking_distance() -> None:
    machine = make_machine()
    machine.plan(0.0, {"A": 40.0}, FAST)
    counted = machine.axes["A"].counted_deg(1.0)

    is_lost = machine.abandon(1.0)

    axis = machine.axes["A"]
    assert is_lost
    assert axis.counted_deg(5.0) == pytest.approx(counted)
    assert axis.dial(5.0) == pytest.approx(counted + RAMP_DEG)


def test_homing_brings_counter_and_dial_together() -> None:
    machine = make_machine(left_at_deg=-75.0)
    axis = machine.axes["A"]
    assert axis.counted_deg(0.0) == 0.0

    homed_s = machine.home(0.0)

    assert homed_s == pytest.approx(75.0 / 10.0 + 0.1 + LOCATES_IN_S)
    assert (axis.dial(homed_s), axis.counted_deg(homed_s)) == pytest.approx((0.0, 0.0), abs=1e-12)


def test_homing_after_lost_steps_finds_the_place_again() -> None:
    machine = make_machine()
    machine.plan(0.0, {"A": 40.0}, FAST)
    machine.abandon(1.0)

    homed_s = machine.home(1.05)
    machine.plan(homed_s, {"A": 30.0}, FAST)

    assert machine.axes["A"].dial(homed_s + 100.0) == pytest.approx(30.0, abs=1e-12)
