"""The simulated mount on its wire: acknowledgements, real-time bytes, sticky errors, alarms, homing."""

import re

import pytest
from twin_wire import Wire, torn, whole

from rigctl_sim.gcode_report import LONGEST_LINE
from rigctl_sim.gcode_twin import ANSWERS_IN_S, GcodeTwin
from rigctl_sim.machine import MOST_PLANNED, Axis, AxisMake, Machine

MAKE = AxisMake((-360.0, 360.0), 20.0, 100.0, 0.001)
GREETING = "simulated-mount 1.1 ['$' for help]"
MOVE_90_S = 90.0 / 20.0 + 0.2


def make_axis(*, left_at_deg: float = 0.0) -> Axis:
    return Axis(MAKE, left_at_deg=left_at_deg)


def make_twin(letters: str = "A") -> GcodeTwin:
    return GcodeTwin(Machine({letter: make_axis() for letter in letters}), name="mount 1")


@pytest.fixture
def axis() -> Axis:
    return make_axis()


@pytest.fixture
def wire(axis: Axis) -> Wire:
    return Wire(GcodeTwin(Machine({"A": axis}), name="mount 1"))


def report(wire: Wire, *, at_s: float) -> str:
    """The answer to `?`, however many lines stand before it, without the fields that come now and then."""
    wire.send(b"?", at_s=at_s)
    line = wire.gather(until_s=at_s + ANSWERS_IN_S).decode().strip().splitlines()[-1]
    return re.sub(r"\|(WCO|Ov):[^|>]*", "", line)


def state(wire: Wire, *, at_s: float) -> str:
    return report(wire, at_s=at_s)[1:].split("|")[0]


# moves and acknowledgements


def test_a_move_is_acknowledged_when_it_is_planned_not_when_it_is_done(wire: Wire) -> None:
    wire.send(b"G90 G0 A90\n", at_s=1.0)

    assert wire.gather() == b"ok\r\n"
    assert wire.now_s == 1.0 + ANSWERS_IN_S
    assert report(wire, at_s=2.0) == "<Run|MPos:0.000,0.000,0.000,18.000|Bf:14,255|FS:1200,0>"


def test_a_mount_that_has_arrived_is_idle_at_its_target(wire: Wire) -> None:
    wire.send(b"G0 A90\n", at_s=0.0)

    assert state(wire, at_s=MOVE_90_S - 1e-3) == "Run"
    assert report(wire, at_s=MOVE_90_S) == "<Idle|MPos:0.000,0.000,0.000,90.000|Bf:15,255|FS:0,0>"


def test_a_turn_is_not_wrapped(wire: Wire) -> None:
    wire.send(b"G0 A359.5\nG91\nG0 A-719.25\n", at_s=0.0)

    assert "0.000,-359.750|" in report(wire, at_s=100.0)


def test_lines_are_acknowledged_once_each_in_their_order(wire: Wire) -> None:
    assert wire.ask_lines(b"G0 A1\n\n  \nG2 A1\n\nG0 A2") == ["ok", "ok", "ok", "error:20", "ok", "ok"]


def test_a_pause_is_acknowledged_when_all_motion_is_done(wire: Wire) -> None:
    wire.send(b"G0 A90\nG4 P0\n", at_s=0.0)

    assert wire.gather() == b"ok\r\nok\r\n"
    assert wire.now_s == pytest.approx(MOVE_90_S + ANSWERS_IN_S)


def test_a_pause_lasts_as_long_as_it_says(wire: Wire) -> None:
    wire.send(b"G4 P2.5\n", at_s=1.0)

    wire.gather()
    assert wire.now_s == pytest.approx(3.5 + ANSWERS_IN_S)


def test_lines_behind_a_pause_wait_and_are_answered_in_a_burst(wire: Wire) -> None:
    wire.send(b"G0 A90\nG4 P0\nG0 A0\n\n", at_s=0.0)

    assert wire.gather(until_s=1.0) == b"ok\r\n"
    assert wire.gather() == b"ok\r\n" * 3


def test_a_report_passes_lines_that_wait(wire: Wire) -> None:
    wire.send(b"G0 A90\nG4 P0\n", at_s=0.0)
    wire.gather(until_s=0.5)

    assert state(wire, at_s=1.0) == "Run"


def test_when_the_queue_is_full_a_line_waits_for_room(wire: Wire) -> None:
    lines = b"".join(b"G0 A%d\n" % (4 * (number + 1)) for number in range(MOST_PLANNED + 1))
    wire.send(lines, at_s=0.0)

    assert wire.gather(until_s=0.1) == b"ok\r\n" * MOST_PLANNED
    assert wire.gather() == b"ok\r\n"
    assert wire.now_s == pytest.approx(0.4 + ANSWERS_IN_S)


def test_a_feed_move_is_slower(wire: Wire) -> None:
    wire.send(b"G1 A90 F600\n", at_s=0.0)

    assert "FS:600,0" in report(wire, at_s=4.0)


def test_the_machine_frame_is_absolute_even_among_relative_moves(wire: Wire) -> None:
    wire.send(b"G91 G0 A30\nG53 G0 A10\n", at_s=0.0)

    assert ",10.000|" in report(wire, at_s=50.0)


# real-time bytes


def test_a_report_needs_no_line_end_and_brings_no_acknowledgement(wire: Wire) -> None:
    wire.send(b"?")

    assert wire.gather().decode() == (
        "<Idle|MPos:0.000,0.000,0.000,0.000|Bf:15,255|FS:0,0|WCO:0.000,0.000,0.000,0.000>\r\n"
    )


def test_real_time_bytes_are_picked_out_of_the_middle_of_a_line(wire: Wire) -> None:
    wire.send(b"G0 A?9?0\n", at_s=0.0)

    lines = wire.gather().decode().splitlines()

    assert [line[:5] for line in lines] == ["<Idle", "<Idle", "ok"]
    assert ",90.000|" in report(wire, at_s=20.0)


def test_the_fields_of_a_report_vary(wire: Wire) -> None:
    reports = [wire.ask_lines(b"?")[0] for _ in range(21)]

    assert [number for number, line in enumerate(reports) if "WCO" in line] == [0, 10, 20]
    assert [number for number, line in enumerate(reports) if "Ov:" in line] == [1]


@pytest.mark.parametrize(("letters", "places"), [("X", 3), ("A", 4), ("AB", 5), ("C", 6)])
def test_a_report_lists_the_axes_up_to_the_last(letters: str, places: int) -> None:
    line = report(Wire(make_twin(letters)), at_s=0.0)

    assert line.split("|")[1].count(",") + 1 == places


def test_two_axes_of_one_controller_move_apart() -> None:
    wire = Wire(make_twin("AB"))
    wire.send(b"G0 A10\nG0 B-20\n", at_s=0.0)

    assert "MPos:0.000,0.000,0.000,10.000,-20.000|" in report(wire, at_s=20.0)


def test_a_small_negative_angle_is_shown_without_a_sign() -> None:
    wire = Wire(make_twin())
    wire.send(b"G0 A5\nG0 A-0.0001\n", at_s=0.0)

    assert ",0.000|" in report(wire, at_s=20.0)


# hold, resume, reset


def test_a_hold_brakes_first_and_then_holds(wire: Wire) -> None:
    wire.send(b"G0 A90\n", at_s=0.0)

    wire.send(b"!", at_s=1.0)

    assert state(wire, at_s=1.1) == "Hold:1"
    assert report(wire, at_s=1.3).startswith("<Hold:0|MPos:0.000,0.000,0.000,20.000|")
    assert report(wire, at_s=99.0).startswith("<Hold:0|MPos:0.000,0.000,0.000,20.000|")


def test_a_held_mount_goes_on_when_it_is_resumed(wire: Wire) -> None:
    wire.send(b"G0 A90\n", at_s=0.0)
    wire.send(b"!", at_s=1.0)

    wire.send(b"~", at_s=10.0)

    assert state(wire, at_s=11.0) == "Run"
    assert ",90.000|" in report(wire, at_s=20.0)


def test_a_pause_is_not_over_while_the_mount_is_held(wire: Wire) -> None:
    wire.send(b"G0 A90\nG4 P0\n", at_s=0.0)
    wire.send(b"!", at_s=1.0)

    assert wire.gather() == b"ok\r\n"
    wire.send(b"~", at_s=10.0)
    assert wire.gather() == b"ok\r\n"


def test_a_reset_while_held_keeps_the_place_and_forgets_the_rest(wire: Wire, axis: Axis) -> None:
    wire.send(b"G0 A90\nG0 A0\nG4 P0\nG0 A5\n", at_s=0.0)
    wire.send(b"!", at_s=1.0)
    wire.gather(until_s=2.0)

    wire.send(b"\x18", at_s=2.0)

    assert wire.gather().decode().split("\r\n") == ["", GREETING, ""]
    assert report(wire, at_s=99.0).startswith("<Idle|MPos:0.000,0.000,0.000,20.000|")
    assert axis.lost_deg == 0.0


def test_a_reset_while_turning_loses_the_place_and_locks(wire: Wire, axis: Axis) -> None:
    wire.send(b"G0 A90\n", at_s=0.0)
    wire.gather()

    wire.send(b"\x18", at_s=1.0)

    assert wire.gather().decode().split("\r\n") == [
        "ALARM:3",
        "",
        GREETING,
        "[MSG:'$H'|'$X' to unlock]",
        "",
    ]
    assert state(wire, at_s=2.0) == "Alarm"
    assert wire.ask(b"G0 A0") == "error:9"
    assert axis.dial(5.0) - axis.counted_deg(5.0) == pytest.approx(2.0)


def test_a_lock_is_taken_away_by_hand(wire: Wire) -> None:
    wire.send(b"G0 A90\n\x18", at_s=0.5)
    wire.gather()

    assert wire.ask_lines(b"$X", at_s=2.0) == ["[MSG:Caution: Unlocked]", "ok"]
    assert wire.ask(b"G0 A0", at_s=2.1) == "ok"


def test_a_reset_brings_back_the_first_modes(wire: Wire) -> None:
    wire.send(b"G91 G1 F60\n\x18")
    wire.gather()

    assert wire.ask_lines(b"$G") == ["[GC:G0 G54 G17 G21 G90 G94 M5 M9 T0 F0 S0]", "ok"]


# errors that stick


def test_an_error_sticks_until_an_empty_line(wire: Wire) -> None:
    answers = wire.ask_lines(b"G2 A1\nG0 A90\nG0 A5\n\nG0 A5")

    assert answers == ["error:20", "error:20", "error:20", "ok", "ok"]
    assert ",5.000|" in report(wire, at_s=30.0)


def test_an_error_sticks_until_a_dollar_command(wire: Wire) -> None:
    assert wire.ask_lines(b"G2\n$G\nG0 A5")[-2:] == ["ok", "ok"]


def test_a_line_too_long_is_an_overflow(wire: Wire) -> None:
    assert wire.ask(b"(" + b"x" * LONGEST_LINE + b")") == "error:11"


@pytest.mark.parametrize("line", [b"$Q", b"$", b"$J=A10"])
def test_a_dollar_command_nobody_knows_is_refused(wire: Wire, line: bytes) -> None:
    assert wire.ask(line) in ("error:3", "error:53")


def test_settings_cannot_be_changed(wire: Wire) -> None:
    assert wire.ask(b"$113=99") == "error:53"


# soft limits


def test_a_target_beyond_the_travel_raises_an_alarm_and_moves_nothing(wire: Wire) -> None:
    assert wire.ask_lines(b"G0 A360.5", at_s=0.0) == ["ALARM:2", "error:9"]
    assert report(wire, at_s=9.0).startswith("<Alarm|MPos:0.000,0.000,0.000,0.000|")


def test_a_target_beyond_the_travel_stops_what_is_under_way(wire: Wire, axis: Axis) -> None:
    wire.send(b"G0 A90\n", at_s=0.0)
    wire.send(b"G0 A400\n", at_s=1.0)

    assert axis.counted_deg(50.0) == pytest.approx(20.0)
    assert axis.lost_deg == 0.0


def test_after_a_soft_limit_the_mount_is_unlocked_and_goes_on(wire: Wire) -> None:
    wire.send(b"G0 A400\n", at_s=0.0)
    wire.gather()

    assert wire.ask_lines(b"$X\nG0 A10", at_s=1.0)[-2:] == ["ok", "ok"]
    assert ",10.000|" in report(wire, at_s=9.0)


def test_a_turning_mount_is_not_unlocked(wire: Wire) -> None:
    wire.send(b"G0 A90\n", at_s=0.0)
    wire.send(b"G0 A400\n$X\n", at_s=1.0)

    assert wire.gather().decode().split()[-1] == "error:8"


def test_a_hold_and_a_resume_do_nothing_while_it_is_locked(wire: Wire) -> None:
    wire.send(b"G0 A90\nG0 A400\n", at_s=0.0)

    wire.send(b"~!", at_s=5.0)

    assert report(wire, at_s=50.0).startswith("<Alarm|MPos:0.000,0.000,0.000,0.000|")


# homing


def test_homing_is_acknowledged_when_it_ends(wire: Wire) -> None:
    wire.send(b"G0 A90\nG4 P0\n$H\n", at_s=0.0)
    wire.gather(until_s=MOVE_90_S + 0.1)

    assert state(wire, at_s=MOVE_90_S + 1.0) == "Home"
    assert wire.gather() == b"ok\r\n"
    assert wire.now_s == pytest.approx(MOVE_90_S + 90.0 / 10.0 + 0.1 + 1.0 + ANSWERS_IN_S)
    assert report(wire, at_s=99.0).startswith("<Idle|MPos:0.000,0.000,0.000,0.000|")


def test_while_homing_lines_wait_and_only_reports_come(wire: Wire) -> None:
    wire.send(b"$H\nG0 A5\n$I\n", at_s=0.0)

    assert state(wire, at_s=0.5) == "Home"
    assert wire.gather().decode().splitlines()[:2] == ["ok", "ok"]


def test_a_mount_left_anywhere_finds_its_zero() -> None:
    axis = make_axis(left_at_deg=33.0)
    wire = Wire(GcodeTwin(Machine({"A": axis}), name="mount 1"))
    assert ",0.000|" in report(wire, at_s=0.0)

    wire.send(b"$H\nG0 A10\n", at_s=1.0)
    wire.gather()

    assert axis.dial(99.0) == pytest.approx(10.0)


def test_homing_is_refused_while_the_mount_turns(wire: Wire) -> None:
    wire.send(b"G0 A90\n$H\n", at_s=0.0)

    assert wire.gather() == b"ok\r\nerror:8\r\n"


def test_homing_takes_a_lock_away(wire: Wire) -> None:
    wire.send(b"G0 A400\n$H\n", at_s=0.0)
    wire.gather()

    assert state(wire, at_s=50.0) == "Idle"


def test_a_reset_while_homing_fails_the_homing(wire: Wire) -> None:
    wire.send(b"$H\n", at_s=0.0)

    wire.send(b"\x18", at_s=0.5)

    assert wire.gather().decode().splitlines()[0] == "ALARM:6"
    assert state(wire, at_s=9.0) == "Alarm"


def test_a_hold_does_not_stop_the_homing(wire: Wire) -> None:
    wire.send(b"$H\n!", at_s=0.0)

    assert wire.gather() == b"ok\r\n"


# what it tells of itself


def test_it_says_that_it_is_simulated(wire: Wire) -> None:
    assert wire.ask_lines(b"$I") == ["[VER:1.1:simulated mount,mount 1]", "[OPT:VH,15,255]", "ok"]


def test_its_settings_are_those_of_the_rig(wire: Wire) -> None:
    lines = wire.ask_lines(b"$$")

    assert {"$103=1000.000", "$113=1200.000", "$123=100.000", "$133=720.000"} <= set(lines)
    assert lines[-1] == "ok"


@pytest.mark.parametrize("line", [b"$I", b"$$", b"$H"])
def test_while_it_turns_it_tells_its_modes_only(wire: Wire, line: bytes) -> None:
    wire.send(b"G0 A90\n", at_s=0.0)
    wire.gather()

    assert wire.ask(line, at_s=1.0) == "error:8"
    assert wire.ask_lines(b"$G", at_s=1.5)[-1] == "ok"


# bytes


@pytest.mark.parametrize(
    "data",
    [
        b"G90 G0 A45.000\n?$I\n",
        b"G2\nG0 A1\n\nG0 A1\nG4 P0.1\n?",
        b"G0 A90\n!\x18$X\n?~",
        b"$H\n?G0 A5\n",
        b"G0 A1\r\nG0 A2\rG0 A3\n\r\n",
        b"\xffG0\x80 A1\n",
    ],
)
def test_torn_bytes_give_the_same_answers_as_whole_ones(data: bytes) -> None:
    assert whole(make_twin(), data, at_s=1.0) == torn(make_twin(), data, at_s=1.0)


def test_carriage_return_and_line_feed_are_one_end_of_line(wire: Wire) -> None:
    wire.send(b"G0 A1\r\nG0 A2\r\n")

    assert wire.gather() == b"ok\r\nok\r\n"


def test_a_reconnected_wire_finds_the_machine_as_it_was(wire: Wire) -> None:
    wire.send(b"G0 A90\n", at_s=0.0)
    wire.gather()

    again = Wire(wire.twin)

    assert again.gather() == b""
    assert ",90.000|" in report(again, at_s=20.0)


def test_nothing_is_ready_when_nothing_was_asked(wire: Wire) -> None:
    assert wire.twin.next_ready_s() is None
    assert wire.twin.take(99.0) == b""


def test_a_late_look_gets_everything_at_once(wire: Wire) -> None:
    wire.send(b"G0 A90\nG4 P0\n$I\n", at_s=0.0)

    taken = wire.twin.take(50.0)

    # the line behind the pause was answered at its own instant, long before the look
    assert taken.decode().splitlines()[:2] == ["ok", "ok"]
    assert taken.decode().splitlines()[-1] == "ok"
