"""What the console writes: short lines at a terminal, plain ones in a log, JSON that everybody can read."""

import fcntl
import io
import json
import math
import os
import struct
import sys
import termios
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass

import pytest
from hypothesis import given
from hypothesis import strategies as st

from rigctl.cli.console import (
    LogProgress,
    TerminalProgress,
    complain,
    complain_of_bug,
    duration,
    progress_for_stream,
    say,
    say_json,
)

REWRITE = "\r\x1b[K"


@dataclass
class Screen:
    """A terminal on standard error."""

    control: int
    line: int

    def resize(self, columns: int) -> None:
        fcntl.ioctl(self.line, termios.TIOCSWINSZ, struct.pack("HHHH", 24, columns, 0, 0))

    def seen(self) -> str:
        """Everything that was written so far."""
        os.write(self.line, b"\x00")
        text = b""
        while not text.endswith(b"\x00"):
            text += os.read(self.control, 65536)
        return text[:-1].decode()


@contextmanager
def terminal(columns: int = 100) -> Iterator[Screen]:
    """Within: standard error is a terminal of some width; standard output stays where it was."""
    control, line = os.openpty()
    before = sys.stderr
    with os.fdopen(line, "w", encoding="utf-8", closefd=False) as stream:
        screen = Screen(control, line)
        screen.resize(columns)
        sys.stderr = stream
        try:
            yield screen
        finally:
            sys.stderr = before
    os.close(control)
    os.close(line)


@pytest.mark.parametrize("columns", [1, 10, 40, 79, 200])
def test_progress_is_never_wider_than_the_terminal(columns: int) -> None:
    """Standard output goes elsewhere here, as in `polrig run ... > answer`: its width must not be taken."""
    with terminal(columns) as screen:
        progress = TerminalProgress()

        progress.phase("x" * 150)
        progress.visit(71, 72, 7620.0)

        _, phase, visit = screen.seen().split(REWRITE)
        assert len(phase) == min(columns - 1, 150)
        assert len(visit) <= columns - 1


def test_progress_follows_a_terminal_that_is_resized() -> None:
    with terminal() as screen:
        progress = TerminalProgress()
        widths = []
        for columns in (60, 20):
            screen.resize(columns)
            progress.phase("x" * 100)
            widths.append(len(screen.seen().split(REWRITE)[-1]))

        assert widths == [59, 19]


def test_progress_tells_how_far_it_is_what_is_left_and_the_phase() -> None:
    with terminal() as screen:
        progress = TerminalProgress()

        progress.phase("step 'data'")
        progress.visit(18, 72, 185.0)

        assert screen.seen().split(REWRITE)[-1] == "18/72 visits  25 %  3 min 05 s left  step 'data'"


def test_a_warning_stays_on_the_screen_and_an_information_does_not() -> None:
    with terminal() as screen:
        progress = TerminalProgress()

        progress.event("homed part mount", "info")
        progress.event("visit 3 was overloaded", "warning")

        seen = screen.seen()
        assert "homed" not in seen
        assert f"{REWRITE}warning: visit 3 was overloaded\r\n" in seen


def test_the_line_is_cleared_at_the_end() -> None:
    with terminal() as screen:
        progress = TerminalProgress()
        progress.phase("making safe")

        progress.end()

        assert screen.seen().endswith(REWRITE)


def test_a_terminal_gets_a_line_that_is_rewritten() -> None:
    with terminal():
        assert isinstance(progress_for_stream(), TerminalProgress)


def test_what_is_no_terminal_gets_plain_lines(capsys: pytest.CaptureFixture[str]) -> None:
    assert isinstance(progress_for_stream(), LogProgress)


def test_a_log_has_a_line_for_every_phase_event_and_tenth_of_the_visits(capsys: pytest.CaptureFixture[str]) -> None:
    progress = LogProgress()

    progress.phase("step 'data'")
    for done in range(1, 41):
        progress.visit(done, 40, float(40 - done))
    progress.event("homed part mount", "info")
    progress.end()

    out, err = capsys.readouterr()
    lines = err.splitlines()
    assert out == ""
    assert (lines[0], lines[-1]) == ("step 'data'", "info: homed part mount")
    assert lines[1:-1] == [f"{done}/40 visits, {40 - done} s left" for done in range(4, 41, 4)]
    assert "\x1b" not in err


def test_a_run_of_a_few_visits_logs_each_of_them(capsys: pytest.CaptureFixture[str]) -> None:
    progress = LogProgress()

    for done in (1, 2, 3):
        progress.visit(done, 3, 0.0)

    assert len(capsys.readouterr().err.splitlines()) == 3


@pytest.mark.parametrize(
    ("seconds", "text"),
    [
        (0.0, "0 s"),
        (59.4, "59 s"),
        (59.6, "1 min 00 s"),
        (185.0, "3 min 05 s"),
        (3599.4, "59 min 59 s"),
        (3599.6, "1 h 00 min"),
        (7659.0, "2 h 07 min"),
        (100 * 3600.0, "100 h 00 min"),
    ],
)
def test_durations_are_short(seconds: float, text: str) -> None:
    assert duration(seconds) == text


def test_numbers_that_json_lacks_become_null_at_any_depth(capsys: pytest.CaptureFixture[str]) -> None:
    say_json({"a": math.nan, "b": [1.0, math.inf, {"c": -math.inf}], "d": (math.nan,), "e": 2, "λ": "25 °C"})

    out = capsys.readouterr().out
    assert json.loads(out) == {"a": None, "b": [1.0, None, {"c": None}], "d": [None], "e": 2, "λ": "25 °C"}
    assert "λ" in out


values = st.recursive(
    st.none() | st.booleans() | st.integers() | st.floats() | st.text(),
    lambda inner: st.lists(inner) | st.dictionaries(st.text(), inner) | st.tuples(inner, inner),
    max_leaves=20,
)


@given(st.dictionaries(st.text(), values))
def test_every_answer_is_one_json_object(answer: dict[str, object]) -> None:
    stream, before = io.TextIOWrapper(io.BytesIO(), encoding="utf-8", errors="surrogatepass"), sys.stdout
    sys.stdout = stream
    try:
        say_json(answer)
    finally:
        sys.stdout = before

    stream.seek(0)
    found = json.loads(stream.read(), parse_constant=lambda name: pytest.fail(f"{name} is no JSON"))
    assert found.keys() == answer.keys()


@pytest.mark.parametrize("tell", [say, complain])
def test_letters_that_a_stream_lacks_are_told_as_escapes_rather_than_not_at_all(
    tell: Callable[[str], None], monkeypatch: pytest.MonkeyPatch
) -> None:
    raw = io.BytesIO()
    for name in ("stdout", "stderr"):
        monkeypatch.setattr(sys, name, io.TextIOWrapper(raw, encoding="ascii"))

    tell("λ/4 plate: whole")

    assert raw.getvalue() == b"\\u03bb/4 plate: whole\n"


@pytest.mark.parametrize("tell", [say, complain])
def test_a_stream_that_was_closed_is_no_reason_to_fail(
    tell: Callable[[str], None], monkeypatch: pytest.MonkeyPatch
) -> None:
    stream = io.StringIO()
    stream.close()
    for name in ("stdout", "stderr"):
        monkeypatch.setattr(sys, name, stream)

    tell("nobody reads this")


def test_a_bug_is_shown_with_its_traceback(capsys: pytest.CaptureFixture[str]) -> None:
    try:
        raise ZeroDivisionError("a bug")
    except ZeroDivisionError as error:
        complain_of_bug(error)

    err = capsys.readouterr().err
    assert "Traceback" in err
    assert "test_cli_console.py" in err
    assert "ZeroDivisionError: a bug" in err
    assert "bug in polrig" in err
