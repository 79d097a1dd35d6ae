"""Lines of G-code taken apart: words, modal groups, and the numbers of their errors."""

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rigctl_sim.gcode_line import Block, LineError, Modes, parse_line


def number_of(line: str) -> int:
    """Number of the error of a line; 0 is none."""
    try:
        parse_line(line, "AB")
    except LineError as error:
        return error.number
    return 0


def test_a_rapid_move_names_its_axis() -> None:
    assert parse_line("G90 G53 G0 A45.000", "A") == Block("rapid", "absolute", True, axes={"A": 45.0})


@pytest.mark.parametrize("line", ["g0a45", "G 0 A 45", "G00A+45.", "\tG0 A45 ; to the half", "G0 (fast) A45"])
def test_case_blanks_and_comments_do_not_count(line: str) -> None:
    assert parse_line(line, "A") == parse_line("G0 A45", "A")


def test_several_axes_move_in_one_block() -> None:
    assert parse_line("G1 A1 B-2 F360", "AB") == Block("feed", feed=360.0, axes={"A": 1.0, "B": -2.0})


def test_a_pause_has_its_time() -> None:
    assert parse_line("G4 P0.25", "A") == Block(pause_s=0.25)


def test_a_line_number_is_dropped() -> None:
    assert parse_line("N12 G0 A45", "A") == parse_line("G0 A45", "A")


def test_words_that_change_nothing_here_are_accepted() -> None:
    assert parse_line("G17 G21 G40 G49 G54 G80 G94", "A") == Block()


@pytest.mark.parametrize(
    ("line", "number"),
    [
        ("45", 1),
        ("G0 =A45", 1),
        ("G", 2),
        ("G0 A", 2),
        ("G0 A-", 2),
        ("G2 A45", 20),
        ("G0.5 A45", 20),
        ("M3", 20),
        ("G0 C45", 20),
        ("G92 A0", 20),
        ("G0 G1 A45", 21),
        ("G90 G91", 21),
        ("G0 A1 A2", 25),
        ("G4", 28),
        ("G0 A1 P1", 36),
        ("G4 P1 A1", 36),
        ("G4 P-1", 2),
    ],
)
def test_each_mistake_has_its_number(line: str, number: int) -> None:
    assert number_of(line) == number


@settings(deadline=None)
@given(st.text(alphabet="GAFPNX0149.-+ ();=", max_size=24))
def test_no_line_is_too_strange(line: str) -> None:
    assert 0 <= number_of(line) <= 36


@settings(deadline=None)
@given(st.floats(-3600, 3600).map(lambda value: round(value, 3)))
def test_every_angle_that_a_driver_writes_is_read_back(angle_deg: float) -> None:
    assert parse_line(f"G0 A{angle_deg:.3f}", "A").axes == {"A": angle_deg}


def test_modes_last_until_another_of_their_group() -> None:
    modes = Modes()

    for line in ("G91", "G1 A1 F60", "A2", "G90 A3"):
        modes.follow(parse_line(line, "A"))

    assert (modes.motion, modes.distance, modes.feed) == ("feed", "absolute", 60.0)
    assert str(modes) == "G1 G54 G17 G21 G90 G94 M5 M9 T0 F60 S0"


def test_a_feed_move_needs_a_feed_rate() -> None:
    with pytest.raises(LineError, match="error:22"):
        Modes().follow(parse_line("G1 A1", "A"))
