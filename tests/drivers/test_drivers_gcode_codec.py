"""What motion firmware writes, line by line."""

from collections.abc import Callable

import pytest
from codec_checks import Sample, check_sample, is_refused, mutated
from hypothesis import given
from hypothesis import strategies as st
from scripted_twin import ADDRESS

from rigctl.errors import FramingError
from rigctl.interfaces import Identity
from rigctl_drivers.gcode_codec import (
    AXES,
    Ack,
    Alarm,
    Message,
    Note,
    Report,
    axis_position,
    format_move,
    is_ack_line,
    is_greeting_line,
    is_report_line,
    last_alarm,
    parse_build,
    parse_line,
    parse_report,
)
from rigctl_drivers.gcode_meanings import ALARMS, ERRORS, HALTS, alarm_words, error_words


def of_line(parse: Callable[..., object]) -> Callable[[bytes], object]:
    return lambda data: parse(data, address=ADDRESS)


def of_lines(data: bytes) -> object:
    return parse_build(tuple(data.split(b"\n")), address=ADDRESS)


SAMPLES = (
    Sample(
        "report in the machine's frame",
        of_line(parse_report),
        b"<Run|MPos:0.000,-1.500,370.250|Bf:15,255|FS:1200,0|WCO:0.000,0.000,10.000>",
        Report("Run", None, (0.0, -1.5, 370.25), None, (0.0, 0.0, 10.0)),
        is_closed=True,
    ),
    Sample(
        "report in the work frame",
        of_line(parse_report),
        b"<Hold:0|WPos:45.000>",
        Report("Hold", 0, None, (45.0,), None),
        is_closed=True,
    ),
    Sample(
        "line of a report",
        of_line(parse_line),
        b"<Alarm:1|MPos:0.000>",
        Report("Alarm", 1, (0.0,), None, None),
    ),
    Sample("acknowledgement", of_line(parse_line), b"ok", Ack()),
    Sample("refusal", of_line(parse_line), b"error:22", Ack(22)),
    Sample("alarm", of_line(parse_line), b"ALARM:3", Alarm(3)),
    Sample("message", of_line(parse_line), b"[MSG:'$H'|'$X' to unlock]", Message("MSG", "'$H'|'$X' to unlock")),
    Sample(
        "greeting",
        of_line(parse_line),
        b"firmware-x 1.1h ['$' for help]",
        Note("firmware-x 1.1h ['$' for help]", True),
    ),
    Sample("setting", of_line(parse_line), b"$103=1000.000", Note("$103=1000.000")),
    Sample("empty line", of_line(parse_line), b"", Note("")),
    Sample(
        "build",
        of_lines,
        b"[VER:1.1:simulated mount,mount 1]\n[OPT:VH,15,255]",
        Identity("", "simulated mount", "mount 1", "1.1"),
    ),
)


@pytest.mark.parametrize("sample", SAMPLES, ids=lambda sample: sample.name)
def test_a_parser_reads_the_whole_line_and_refuses_the_rest_only_by_the_documented_error(
    sample: Sample,
) -> None:
    check_sample(sample)


@given(data=st.data())
def test_no_mutation_of_a_line_breaks_a_parser(data: st.DataObject) -> None:
    sample = data.draw(st.sampled_from(SAMPLES))
    is_refused(sample.parse, data.draw(mutated(sample.whole)))


@given(noise=st.binary(max_size=60))
def test_no_noise_breaks_a_parser(noise: bytes) -> None:
    for sample in SAMPLES:
        is_refused(sample.parse, noise)
    for is_kind in (is_ack_line, is_report_line, is_greeting_line):
        assert is_kind(noise) in (True, False)
    last_alarm(noise)


@pytest.mark.parametrize(
    "line",
    [
        b"<Idle>",
        b"<Idle|FS:0,0>",
        b"<Idle|MPos:0.000|WPos:0.000>",
        b"<Idle|MPos:0.000|MPos:1.000>",
        b"<Idle|MPos:>",
        b"<Idle|MPos:0,0,0,0,0,0,0>",
        b"<Idle|MPos:9.9E37>",
        b"<Dreaming|MPos:0.000>",
        b"<|MPos:0.000>",
        b"<Idle|MPos:0.000",
        b"<Idle|MPos:0.0<Idle|MPos:0.000>",
        b"<Idle|MPos:1.0>ok",
        b"<Idle|FS:0<Run|MPos:45.000>",  # a torn report that the next one ran into
    ],
)
def test_a_report_without_one_sound_position_is_refused(line: bytes) -> None:
    with pytest.raises(FramingError):
        parse_report(line, address=ADDRESS)


@pytest.mark.parametrize("line", [b"OK", b"okay", b"error:", b"error:x", b"ALARM", b"1.5E-3", b'0,"No error"'])
def test_a_line_of_another_convention_is_refused(line: bytes) -> None:
    with pytest.raises(FramingError, match="none of this convention"):
        parse_line(line, address=ADDRESS)


def test_fields_that_are_not_needed_are_not_looked_at() -> None:
    report = parse_report(b"<Idle|MPos:1.000|Ov:100,100,100|A:SF|H:1|TLR:0|Odd>", address=ADDRESS)

    assert report.machine == (1.0,)


@pytest.mark.parametrize(
    ("line", "is_moving"),
    [
        (b"<Run|MPos:0>", True),
        (b"<Jog|MPos:0>", True),
        (b"<Home|MPos:0>", True),
        (b"<Hold:1|MPos:0>", True),
        (b"<Hold:0|MPos:0>", False),
        (b"<Hold|MPos:0>", False),
        (b"<Door:2|MPos:0>", True),
        (b"<Door:0|MPos:0>", False),
        (b"<Idle|MPos:0>", False),
        (b"<Alarm:2|MPos:0>", False),
        (b"<Sleep|MPos:0>", False),
    ],
)
def test_a_state_tells_whether_the_mount_turns(line: bytes, is_moving: bool) -> None:
    assert parse_report(line, address=ADDRESS).is_moving == is_moving


@pytest.mark.parametrize(
    ("values", "axis", "position"),
    [
        ((5.0,), "A", 5.0),
        ((5.0,), "Z", 5.0),
        ((1.0, 2.0, 3.0, 4.0), "A", 4.0),
        ((1.0, 2.0, 3.0, 4.0, 5.0, 6.0), "C", 6.0),
        ((1.0, 2.0, 3.0), "A", None),
        ((1.0, 2.0, 3.0), "Y", 2.0),
    ],
)
def test_an_axis_is_found_by_its_letter(values: tuple[float, ...], axis: str, position: float | None) -> None:
    assert axis_position(values, axis) == position


@pytest.mark.parametrize(
    ("position_deg", "line"),
    [
        (45.0, b"G90 G53 G0 A45.000\n"),
        (370.25, b"G90 G53 G0 A370.250\n"),
        (-720.0005, b"G90 G53 G0 A-720.000\n"),
        (-0.0001, b"G90 G53 G0 A0.000\n"),
    ],
)
def test_a_move_has_three_decimals_is_never_wrapped_and_knows_no_minus_zero(position_deg: float, line: bytes) -> None:
    assert format_move("A", position_deg) == line


@given(position_deg=st.floats(-3600, 3600), axis=st.sampled_from(AXES))
def test_a_move_says_the_position_to_half_a_thousandth(position_deg: float, axis: str) -> None:
    line = format_move(axis, position_deg)

    assert abs(float(line.split(axis.encode())[1]) - position_deg) <= 0.00051


@pytest.mark.parametrize(
    ("line", "kinds"),
    [
        (b"ok", "ack"),
        (b" ok ", "ack"),
        (b"error:9", "ack"),
        (b"ALARM:1", "ack"),
        (b"okay", ""),
        (b"<Idle|MPos:0>", "report"),
        (b"[MSG:ok]", ""),
        (b"x 1.1 ['$' for help]", "greeting"),
        (b"[echo: x 1.1 [y]]", ""),
    ],
)
def test_the_last_line_of_an_answer_is_told_by_its_kind(line: bytes, kinds: str) -> None:
    tests = {"ack": is_ack_line, "report": is_report_line, "greeting": is_greeting_line}

    assert "".join(name for name, is_kind in tests.items() if is_kind(line)) == kinds


@pytest.mark.parametrize(
    ("lines", "alarm"),
    [
        (b"", None),
        (b"ok\nALARM:1\r\n[MSG:x]", 1),
        (b"ALARM:1\nALARM:3", 3),
        (b"\xffALARM:2", 2),
        (b"ALARM:", None),
    ],
)
def test_the_last_alarm_is_found_among_lines_of_any_kind(lines: bytes, alarm: int | None) -> None:
    assert last_alarm(lines) == alarm


@pytest.mark.parametrize("lines", [(b"ok",), (b"[OPT:V]",), (b"[VER:1:a]", b"[VER:1:b]")])
def test_a_build_without_one_version_is_refused(lines: tuple[bytes, ...]) -> None:
    with pytest.raises(FramingError, match="no build information"):
        parse_build(lines, address=ADDRESS)


def test_a_build_whose_owner_gave_it_no_text_has_no_model() -> None:
    assert parse_build((b"[VER:1.1h:]", b"ok"), address=ADDRESS) == Identity("", "", "", "1.1h")


@pytest.mark.parametrize(
    ("code", "words"),
    [
        (1, "letter"), (2, "number"), (3, "$"), (5, "homing"), (7, "store"), (8, "idle"), (9, "locked"),
        (10, "homing"), (11, "too long"), (15, "travel"), (20, "unsupported"), (22, "feed rate"),
        (25, "repeated"), (28, "missing"), (33, "target"), (36, "unused"), (53, "disabled"),
    ],
)  # fmt: skip
def test_the_numbers_of_errors_have_their_documented_meaning(code: int, words: str) -> None:
    assert words in ERRORS[code]
    assert words in error_words(code)


@pytest.mark.parametrize(
    ("code", "words"),
    [
        (1, "hard limit"),
        (2, "soft limits"),
        (3, "reset while it moved"),
        (6, "homing failed"),
        (9, "homing failed"),
    ],
)
def test_the_numbers_of_alarms_have_their_documented_meaning(code: int, words: str) -> None:
    assert words in ALARMS[code]
    assert alarm_words(code).startswith(f"alarm {code}: ")


def test_numbers_beyond_the_tables_are_said_to_be_unknown() -> None:
    assert "not in the table" in error_words(999)
    assert "alarm 999: not in the table" in alarm_words(999)
    assert "does not tell" in alarm_words(None)


def test_every_state_in_which_a_mount_stands_still_for_ever_says_what_to_do() -> None:
    assert set(HALTS) == {"Hold", "Door", "Check", "Sleep"}
    assert all(halt.what and halt.do for halt in HALTS.values())
