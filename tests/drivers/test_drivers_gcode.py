"""The rotary axis's bytes on the wire: turns, sense, alarms, homing and stopping."""

import pytest
from scripted_twin import ADDRESS, Bench, with_defaults

from rigctl.errors import (
    FramingError,
    LinkTimeoutError,
    MotionError,
    RefusedError,
    StopRequestedError,
    WrongInstrumentError,
)
from rigctl.interfaces import Begun, Identity, StageCapabilities
from rigctl_drivers.gcode import AT_START, CLOCKWISE, DRIVER, HOMING_S, LOOKS_FOR_REST, GcodeRotary
from rigctl_drivers.gcode_family import GCODE

OK = b"ok\r\n"
GREETING = b"\r\nfirmware 1.1 ['$' for help]\r\n"


def make_mount(bench: Bench, **options: object) -> GcodeRotary:
    return GcodeRotary(bench.link, with_defaults(dict(DRIVER.options), **options))


def report(state: str, position: str = "0.000", more: str = "") -> bytes:
    return f"<{state}|MPos:{position}{more}>\r\n".encode()


def begin(bench: Bench, mount: GcodeRotary, angle_deg: float, line: bytes) -> Begun[float]:
    """Begin a first move, which asks where the mount stands before."""
    bench.twin.expect(b"?", report("Idle"))
    bench.twin.expect(line, OK)
    return mount.begin_move(angle_deg)


def test_identify_reads_the_build_and_looks_for_the_axis(gcode: Bench) -> None:
    gcode.twin.expect(b"$I\n", b"[VER:1.1:simulated mount,mount 1]\r\n[OPT:VH,15,255]\r\nok\r\n")
    gcode.twin.expect(b"?", report("Idle", "0.000,0.000,0.000,0.000"))

    identity = make_mount(gcode).identify()

    assert identity == Identity("", "simulated mount", "mount 1", "1.1")
    assert identity.is_simulated


def test_a_controller_without_the_axis_is_the_wrong_one(gcode: Bench) -> None:
    gcode.twin.expect(b"$I\n", b"[VER:1.1:]\r\nok\r\n")
    gcode.twin.expect(b"?", report("Idle", "0.000,0.000,0.000"))

    with pytest.raises(WrongInstrumentError, match="no axis A") as caught:
        make_mount(gcode).identify()

    assert caught.value.where == ADDRESS


def test_a_controller_that_tells_no_build_is_the_wrong_one(gcode: Bench) -> None:
    gcode.twin.expect(b"$I\n", OK)

    with pytest.raises(WrongInstrumentError, match="question for its build"):
        make_mount(gcode).identify()


def test_a_move_is_one_line_and_its_poll_one_byte(gcode: Bench) -> None:
    mount = make_mount(gcode)
    begun = begin(gcode, mount, 45.0, b"G90 G53 G0 A45.000\n")
    gcode.twin.expect(b"?", report("Run", "20.000"))
    gcode.twin.expect(b"?", report("Idle", "45.000"))

    assert begun.poll() is None
    assert begun.poll() == 45.0


def test_a_move_is_due_after_the_travel_time_of_the_capabilities(gcode: Bench) -> None:
    mount = make_mount(gcode)
    gcode.timeline.wait_until(3.0)

    begun = begin(gcode, mount, 45.0, b"G90 G53 G0 A45.000\n")

    assert begun.due_s == pytest.approx(3.0 + mount.capabilities.travel_time_s(45.0))
    assert begun.give_up_s > begun.due_s + begun.again_s


def test_the_next_move_knows_where_the_last_one_ended(gcode: Bench) -> None:
    mount = make_mount(gcode)
    begun = begin(gcode, mount, 45.0, b"G90 G53 G0 A45.000\n")
    gcode.twin.expect(b"?", report("Idle", "45.000"))
    begun.poll()
    gcode.twin.expect(b"G90 G53 G0 A46.000\n", OK)

    due_s = mount.begin_move(46.0).due_s

    assert due_s == pytest.approx(gcode.timeline.now() + mount.capabilities.travel_time_s(1.0))


def test_turns_are_counted_and_never_wrapped(gcode: Bench) -> None:
    begun = begin(gcode, make_mount(gcode), 370.25, b"G90 G53 G0 A370.250\n")
    gcode.twin.expect(b"?", report("Idle", "370.250"))

    assert begun.poll() == 370.25


def test_a_clockwise_mount_turns_the_other_way_and_reads_in_the_bench_s_sense(gcode: Bench) -> None:
    mount = make_mount(gcode, positive=CLOCKWISE)
    begun = begin(gcode, mount, 30.0, b"G90 G53 G0 A-30.000\n")
    gcode.twin.expect(b"?", report("Idle", "-30.000"))

    assert begun.poll() == 30.0


def test_a_clockwise_mount_at_zero_reads_no_minus_zero(gcode: Bench) -> None:
    gcode.twin.expect(b"?", report("Idle"))

    assert str(make_mount(gcode, positive=CLOCKWISE).angle_deg()) == "0.0"


def test_another_axis_of_the_controller_is_moved_and_read_by_its_letter(gcode: Bench) -> None:
    mount = make_mount(gcode, channel="B")
    gcode.twin.expect(b"?", report("Idle", "0.000,0.000,0.000,1.000,2.000"))
    gcode.twin.expect(b"G90 G53 G0 B5.000\n", OK)
    gcode.twin.expect(b"?", report("Idle", "0.000,0.000,0.000,1.000,5.000"))

    assert mount.begin_move(5.0).poll() == 5.0


@pytest.mark.parametrize("reached", ["45.000", "45.001", "44.999"])
def test_a_mount_within_its_resolution_has_arrived(gcode: Bench, reached: str) -> None:
    begun = begin(gcode, make_mount(gcode), 45.0, b"G90 G53 G0 A45.000\n")
    gcode.twin.expect(b"?", report("Idle", reached))

    assert begun.poll() == float(reached)


def test_a_coarse_mount_arrives_within_its_own_resolution(gcode: Bench) -> None:
    mount = make_mount(gcode, resolution=0.0125)
    begun = begin(gcode, mount, 45.006, b"G90 G53 G0 A45.006\n")
    gcode.twin.expect(b"?", report("Idle", "45.000"))

    assert begun.poll() == 45.0


@pytest.mark.parametrize("stands", ["12.500", "45.002", "44.998", "405.000"])
def test_a_mount_that_rests_elsewhere_twice_has_stalled(gcode: Bench, stands: str) -> None:
    begun = begin(gcode, make_mount(gcode), 45.0, b"G90 G53 G0 A45.000\n")
    gcode.twin.expect(b"?", report("Idle", stands))
    gcode.twin.expect(b"?", report("Idle", stands))

    assert begun.poll() is None
    with pytest.raises(MotionError, match=f"stands at {stands} deg instead of 45.000 deg"):
        begun.poll()


def test_a_report_from_before_the_start_is_not_taken_for_a_stall(gcode: Bench) -> None:
    begun = begin(gcode, make_mount(gcode), 45.0, b"G90 G53 G0 A45.000\n")
    gcode.twin.expect(b"?", report("Idle", "0.000"))
    gcode.twin.expect(b"?", report("Run", "1.000"))
    gcode.twin.expect(b"?", report("Idle", "45.000"))

    assert [begun.poll(), begun.poll(), begun.poll()] == [None, None, 45.0]


@pytest.mark.parametrize(
    ("state", "words"),
    [("Hold:0", "held"), ("Door:1", "safety door"), ("Check", "moves nothing"), ("Sleep", "sleeps")],
)
def test_a_mount_that_is_kept_from_turning_says_by_what_and_what_to_do(gcode: Bench, state: str, words: str) -> None:
    begun = begin(gcode, make_mount(gcode), 45.0, b"G90 G53 G0 A45.000\n")
    gcode.twin.expect(b"?", report(state))

    with pytest.raises(MotionError, match=words) as caught:
        begun.poll()

    assert caught.value.do


def test_an_alarm_on_the_way_is_told_with_its_meaning_and_what_to_do(gcode: Bench) -> None:
    begun = begin(gcode, make_mount(gcode), 45.0, b"G90 G53 G0 A45.000\n")
    gcode.twin.expect(b"?", b"ALARM:1\r\n" + report("Alarm", "20.000"))

    with pytest.raises(MotionError, match="alarm 1: a hard limit was hit") as caught:
        begun.poll()

    assert "home the mount" in caught.value.do


def test_an_alarm_told_unasked_between_two_questions_keeps_its_number(gcode: Bench) -> None:
    begun = begin(gcode, make_mount(gcode), 45.0, b"G90 G53 G0 A45.000\n")
    gcode.twin.say(b"ALARM:3\r\n[MSG:x]\r\n", at_s=1.0)
    gcode.timeline.wait_until(1.0)
    gcode.twin.expect(b"?", report("Alarm"))
    gcode.twin.expect(b"\n", OK)
    gcode.twin.expect(b"?", report("Alarm"))
    gcode.twin.expect(b"?", report("Alarm"))

    with pytest.raises(MotionError, match="alarm 3: it was reset while it moved"):
        begun.poll()


def test_an_alarm_whose_number_stands_in_the_state_is_told_by_it(gcode: Bench) -> None:
    gcode.twin.expect(b"?", report("Alarm:9"))

    with pytest.raises(MotionError, match="alarm 9: homing failed"):
        make_mount(gcode).angle_deg()


def test_an_alarm_that_has_passed_does_not_give_its_number_to_the_next(gcode: Bench) -> None:
    mount = make_mount(gcode)
    gcode.twin.expect(b"?", report("Alarm:3"))
    gcode.twin.expect(b"?", report("Idle"))
    gcode.twin.expect(b"?", report("Alarm"))
    with pytest.raises(MotionError, match="alarm 3"):
        mount.angle_deg()
    mount.angle_deg()

    with pytest.raises(MotionError, match="an alarm whose number it does not tell"):
        mount.angle_deg()


def test_an_alarm_in_place_of_the_acknowledgement_is_told_and_the_link_resyncs(gcode: Bench) -> None:
    mount = make_mount(gcode)
    gcode.twin.expect(b"?", report("Idle"))
    gcode.twin.expect(b"G90 G53 G0 A45.000\n", b"ALARM:2\r\nerror:9\r\n")

    with pytest.raises(MotionError, match="alarm 2: the target is beyond the soft limits"):
        mount.begin_move(45.0)

    assert not gcode.link.is_in_step


def test_a_controller_that_fell_silent_after_an_alarm_is_told_as_in_alarm(gcode: Bench) -> None:
    begun = begin(gcode, make_mount(gcode), 45.0, b"G90 G53 G0 A45.000\n")
    gcode.twin.say(b"ALARM:1\r\n[MSG:Reset to continue]\r\n", at_s=1.0)
    gcode.timeline.wait_until(1.0)
    gcode.twin.expect(b"?")

    with pytest.raises(MotionError, match="alarm 1: a hard limit"):
        begun.poll()


def test_a_controller_that_falls_silent_without_an_alarm_times_out(gcode: Bench) -> None:
    gcode.twin.expect(b"?")
    gcode.twin.expect(b"?")

    with pytest.raises(LinkTimeoutError):
        make_mount(gcode).angle_deg()


def test_a_refusal_is_told_with_its_meaning_and_cleared(gcode: Bench) -> None:
    mount = make_mount(gcode)
    gcode.twin.expect(b"?", report("Idle"))
    gcode.twin.expect(b"G90 G53 G0 A45.000\n", b"error:20\r\n")
    gcode.twin.expect(b"\n", OK)

    with pytest.raises(RefusedError, match="error 20, an unsupported command") as caught:
        mount.begin_move(45.0)

    assert (caught.value.code, caught.value.text) == (20, "an unsupported command")
    assert gcode.link.is_in_step


@pytest.mark.parametrize("error", [8, 9])
def test_a_line_that_an_alarm_locks_out_is_told_as_the_alarm(gcode: Bench, error: int) -> None:
    mount = make_mount(gcode)
    gcode.twin.expect(b"?", report("Idle"))
    gcode.twin.expect(b"G90 G53 G0 A45.000\n", f"error:{error}\r\n".encode())
    gcode.twin.expect(b"\n", OK)
    gcode.twin.expect(b"?", report("Alarm"))

    with pytest.raises(MotionError, match="an alarm whose number it does not tell"):
        mount.begin_move(45.0)


def test_a_line_that_a_held_machine_refuses_is_a_refusal(gcode: Bench) -> None:
    gcode.twin.expect(b"$I\n", b"error:8\r\n")
    gcode.twin.expect(b"\n", OK)
    gcode.twin.expect(b"?", report("Hold:0"))

    with pytest.raises(RefusedError, match="not idle"):
        make_mount(gcode).identify()


def test_reports_and_messages_are_kept_out_of_the_acknowledgements(gcode: Bench) -> None:
    mount = make_mount(gcode)
    gcode.twin.expect(b"?", b"[MSG:Pgm End]\r\n" + report("Idle"))
    gcode.twin.expect(b"G90 G53 G0 A45.000\n", b"[MSG:x]\r\n" + report("Run", "1.000") + b"\r\nok\r\n")
    gcode.twin.expect(b"?", report("Idle", "45.000"))

    assert mount.begin_move(45.0).poll() == 45.0


def test_replies_that_come_byte_by_byte_are_read_whole(gcode: Bench) -> None:
    gcode.twin.expect(b"?", report("Idle", "1.250"), drips_s=0.01)

    assert make_mount(gcode).angle_deg() == 1.25


def test_a_report_that_is_none_is_refused_and_the_link_resyncs_before_the_next(gcode: Bench) -> None:
    gcode.twin.expect(b"?", b"<Idle|MPos:12.\r\n")

    with pytest.raises(FramingError):
        make_mount(gcode).angle_deg()

    assert not gcode.link.is_in_step


def test_a_position_in_the_work_frame_is_read_once_its_zero_has_been_told(gcode: Bench) -> None:
    gcode.twin.expect(b"?", b"<Idle|WPos:35.000>\r\n")
    gcode.twin.expect(b"?", b"<Idle|WPos:35.000|WCO:10.000>\r\n")
    gcode.twin.expect(b"?", b"<Idle|WPos:36.000>\r\n")
    mount = make_mount(gcode)

    assert mount.angle_deg() == 45.0
    assert mount.angle_deg() == 46.0


def test_a_work_frame_whose_zero_is_never_told_is_given_up(gcode: Bench) -> None:
    for _ in range(31):
        gcode.twin.expect(b"?", b"<Idle|WPos:35.000>\r\n")

    with pytest.raises(MotionError, match="never tells where that begins"):
        make_mount(gcode).angle_deg()


def test_a_work_offset_in_a_report_of_machine_positions_changes_nothing(gcode: Bench) -> None:
    gcode.twin.expect(b"?", report("Idle", "45.000", "|WCO:10.000"))

    assert make_mount(gcode).angle_deg() == 45.0


@pytest.mark.parametrize(("state", "is_homed"), [("Idle", True), ("Alarm", False)])
def test_a_mount_that_is_never_homed_is_trusted_unless_in_alarm(gcode: Bench, state: str, is_homed: bool) -> None:
    gcode.twin.expect(b"?", report(state))

    assert make_mount(gcode).is_homed() is is_homed


def test_a_mount_that_is_homed_at_the_start_is_not_trusted_before(gcode: Bench) -> None:
    gcode.twin.expect(b"?", report("Idle"))

    assert not make_mount(gcode, homing=AT_START).is_homed()


def test_a_mount_that_is_never_homed_refuses_to_home_and_sends_nothing(gcode: Bench) -> None:
    with pytest.raises(MotionError, match="never homed"):
        make_mount(gcode).begin_home()

    assert gcode.twin.heard == []


def test_homing_is_polled_by_resyncs_until_its_acknowledgement_is_past(gcode: Bench) -> None:
    mount = make_mount(gcode, homing=AT_START)
    gcode.twin.expect(b"$H\n", OK, after_s=2.5)
    begun = mount.begin_home()
    assert not gcode.link.is_in_step
    gcode.timeline.wait_until(begun.due_s)
    gcode.twin.expect(b"?", report("Home"))
    assert begun.poll() is None

    gcode.timeline.wait_until(3.0)
    for data, answer in ((b"?", report("Idle")), (b"\n", OK), (b"?", report("Idle")), (b"?", report("Idle"))):
        gcode.twin.expect(data, answer)
    assert begun.poll() == 0.0

    gcode.twin.expect(b"?", report("Idle"))
    assert mount.is_homed()
    assert (begun.due_s, begun.give_up_s) == HOMING_S


def test_a_controller_that_is_mute_while_it_homes_is_waited_for(gcode: Bench) -> None:
    mount = make_mount(gcode, homing=AT_START)
    gcode.twin.expect(b"$H\n")
    begun = mount.begin_home()
    gcode.twin.expect(b"?")

    assert begun.poll() is None
    assert not gcode.link.is_in_step


def test_homing_that_is_not_enabled_is_refused_with_its_meaning(gcode: Bench) -> None:
    mount = make_mount(gcode, homing=AT_START)
    gcode.twin.expect(b"$H\n", b"error:5\r\n")
    begun = mount.begin_home()
    for data, answer in ((b"?", report("Idle")), (b"\n", OK), (b"?", report("Idle"))):
        gcode.twin.expect(data, answer)

    with pytest.raises(RefusedError, match="homing is not enabled"):
        begun.poll()


def test_homing_that_fails_is_an_alarm_with_its_meaning(gcode: Bench) -> None:
    mount = make_mount(gcode, homing=AT_START)
    gcode.twin.expect(b"$H\n", b"ALARM:9\r\n[MSG:'$H'|'$X' to unlock]\r\n")
    begun = mount.begin_home()
    for data, answer in ((b"?", report("Alarm")), (b"\n", OK), (b"?", report("Alarm"))):
        gcode.twin.expect(data, answer)

    with pytest.raises(MotionError, match="alarm 9: homing failed: the switch was not found"):
        begun.poll()


def test_an_alarm_takes_the_trust_in_a_homed_mount_away(gcode: Bench) -> None:
    mount = make_mount(gcode, homing=AT_START)
    gcode.twin.expect(b"$H\n", OK)
    begun = mount.begin_home()
    for data, answer in ((b"?", report("Idle")), (b"\n", OK), (b"?", report("Idle")), (b"?", report("Idle"))):
        gcode.twin.expect(data, answer)
    begun.poll()
    gcode.twin.expect(b"?", report("Alarm:1"))
    with pytest.raises(MotionError):
        mount.angle_deg()
    gcode.twin.expect(b"?", report("Idle"))

    assert not mount.is_homed()


def test_stop_holds_waits_for_rest_and_forgets_the_queue_by_a_reset(gcode: Bench) -> None:
    mount = make_mount(gcode)
    gcode.twin.expect(b"!")
    gcode.twin.expect(b"?", report("Hold:1", "20.000"))
    gcode.twin.expect(b"?", report("Hold:0", "21.000"))
    gcode.twin.expect(b"\x18", GREETING)

    mount.stop()

    assert gcode.timeline.now() == pytest.approx(0.2)  # one braking time: 20 deg/s over 100 deg/s2


def test_stop_of_a_mount_at_rest_waits_for_nothing(gcode: Bench) -> None:
    gcode.twin.expect(b"!")
    gcode.twin.expect(b"?", report("Idle"))

    make_mount(gcode).stop()

    assert gcode.timeline.now() == 0.0


def test_stop_acts_at_once_even_while_the_link_is_out_of_step(gcode: Bench) -> None:
    gcode.link.mark_out_of_step()
    gcode.twin.expect(b"!")
    for data, answer in (
        (b"?", report("Hold:0")),
        (b"\n", OK),
        (b"?", report("Hold:0")),
        (b"?", report("Hold:0")),
    ):
        gcode.twin.expect(data, answer)
    gcode.twin.expect(b"\x18", GREETING)

    make_mount(gcode).stop()

    assert gcode.twin.heard[0] == b"!"


def test_stop_resets_a_controller_that_does_not_answer_the_hold(gcode: Bench) -> None:
    gcode.link.mark_out_of_step()
    gcode.twin.expect(b"!")
    gcode.twin.expect(b"?", report("Home"))
    gcode.twin.expect(b"\x18", b"ALARM:6\r\n" + GREETING)
    for data, answer in (
        (b"?", report("Alarm")),
        (b"\n", OK),
        (b"?", report("Alarm")),
        (b"?", report("Alarm")),
    ):
        gcode.twin.expect(data, answer)

    make_mount(gcode).stop()

    assert gcode.twin.heard[2] == b"\x18"


def test_a_controller_that_had_to_be_reset_lost_its_place_even_if_it_does_not_say_so(gcode: Bench) -> None:
    mount = make_mount(gcode, homing=AT_START)
    gcode.twin.expect(b"$H\n", OK)
    begun = mount.begin_home()
    for data, answer in ((b"?", report("Idle")), (b"\n", OK), (b"?", report("Idle")), (b"?", report("Idle"))):
        gcode.twin.expect(data, answer)
    assert begun.poll() == 0.0
    gcode.twin.expect(b"!")
    for data, answer in ((b"?", b""), (b"?", b""), (b"\x18", GREETING), (b"?", report("Idle")), (b"\n", OK)):
        gcode.twin.expect(data, answer)
    for _ in range(3):
        gcode.twin.expect(b"?", report("Idle"))

    mount.stop()

    assert not mount.is_homed()


def test_a_mount_that_does_not_stop_is_told(gcode: Bench) -> None:
    gcode.twin.expect(b"!")
    for _ in range(LOOKS_FOR_REST):
        gcode.twin.expect(b"?", report("Run", "20.000"))

    with pytest.raises(MotionError, match="does not stop") as caught:
        make_mount(gcode).stop()

    assert "power" in caught.value.do


def test_after_a_stop_the_next_move_asks_where_the_mount_stands(gcode: Bench) -> None:
    mount = make_mount(gcode)
    begun = begin(gcode, mount, 45.0, b"G90 G53 G0 A45.000\n")
    gcode.twin.expect(b"?", report("Idle", "45.000"))
    begun.poll()
    gcode.twin.expect(b"!")
    gcode.twin.expect(b"?", report("Idle", "45.000"))
    mount.stop()

    assert begin(gcode, mount, 50.0, b"G90 G53 G0 A50.000\n").due_s > 0.0


def test_a_stop_request_ends_a_poll(gcode: Bench) -> None:
    mount = make_mount(gcode)
    begun = begin(gcode, mount, 45.0, b"G90 G53 G0 A45.000\n")
    gcode.timeline.stop.request("SIGINT")

    with pytest.raises(StopRequestedError):
        begun.poll()


def test_settings_tell_what_the_angle_depends_on(gcode: Bench) -> None:
    gcode.twin.expect(b"?", report("Idle"))

    settings = make_mount(gcode, positive=CLOCKWISE).settings()

    assert settings == {"axis": "A", "positive": CLOCKWISE, "state": "Idle"}


def test_capabilities_follow_the_rig_file() -> None:
    options = with_defaults(dict(DRIVER.options), travel=(0.0, 360.0), speed=30.0, backlash=0.2)

    able = DRIVER.capabilities(options)

    assert able == StageCapabilities(
        travel_deg=(0.0, 360.0),
        speed_deg_per_s=30.0,
        acceleration_deg_per_s2=100.0,
        backlash_deg=0.2,
        resolution_deg=0.001,
    )


def test_the_driver_declares_its_family() -> None:
    assert DRIVER.family == GCODE
    assert all(option.meaning for option in DRIVER.options.values())
