"""Says things on standard output and standard error.

A terminal that was closed, or a pipe whose reader left, must not end a run: such output is dropped.
"""

import json
import math
import os
import shutil
import sys
import traceback
from collections.abc import Mapping
from contextlib import suppress
from typing import Any, TextIO


def _write(stream: TextIO, text: str) -> None:
    with suppress(OSError, ValueError):
        try:
            stream.write(text)
        except UnicodeEncodeError:  # a stream of few letters gets the others as escapes
            stream.write(text.encode(stream.encoding, "backslashreplace").decode(stream.encoding))
        stream.flush()


def say(text: str) -> None:
    """Print a line of the answer."""
    _write(sys.stdout, text + "\n")


def complain(text: str) -> None:
    """Print what went wrong, on standard error."""
    _write(sys.stderr, text + "\n")


def complain_of_bug(error: BaseException) -> None:
    """Print a bug with its traceback, on standard error."""
    lines = "".join(traceback.format_exception(error))
    complain(lines + "This is a bug in polrig; please report it with the lines above.")


def say_json(value: Mapping[str, Any]) -> None:
    """Print an answer as one JSON object; numbers that JSON lacks become null."""
    say(json.dumps(_plain(value), indent=2, ensure_ascii=False, allow_nan=False))


def _plain(value: Any) -> Any:
    if isinstance(value, Mapping):
        return {str(key): _plain(item) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return [_plain(item) for item in value]
    if isinstance(value, float) and not math.isfinite(value):
        return None
    return value


def duration(seconds: float) -> str:
    """Return a duration in words that are short: `8 s`, `3 min 05 s`, `2 h 07 min`."""
    whole = round(seconds)
    if whole < 60:
        return f"{whole} s"
    if whole < 3600:
        return f"{whole // 60} min {whole % 60:02d} s"
    return f"{whole // 3600} h {whole % 3600 // 60:02d} min"


class TerminalProgress:
    """Progress as one line that is rewritten, no wider than the terminal; for standard error."""

    def __init__(self) -> None:
        self._phase = ""

    def phase(self, what: str) -> None:
        """Show another part of the run."""
        self._phase = what
        self._rewrite(what)

    def visit(self, done: int, total: int, left_s: float) -> None:
        """Show how far it is and the time left."""
        self._rewrite(f"{done}/{total} visits  {100 * done // total} %  {duration(left_s)} left  {self._phase}")

    def event(self, text: str, level: str) -> None:
        """Keep a line on the screen, above the one that is rewritten."""
        self._rewrite("")
        if level != "info":
            complain(f"{level}: {text}")

    def end(self) -> None:
        """Clear the line."""
        self._rewrite("")

    def _rewrite(self, text: str) -> None:
        _write(sys.stderr, "\r\x1b[K" + text[: max(_columns() - 1, 0)])


def _columns() -> int:
    """Width of the terminal on standard error; standard output may go elsewhere."""
    with suppress(OSError, ValueError):
        if columns := os.get_terminal_size(sys.stderr.fileno()).columns:
            return columns
    return shutil.get_terminal_size().columns


class LogProgress:
    """Progress as plain lines, for a log: phases, events and every tenth of the visits."""

    def __init__(self) -> None:
        self._tenths = 0

    def phase(self, what: str) -> None:
        """Write the part of the run that begins."""
        complain(what)

    def visit(self, done: int, total: int, left_s: float) -> None:
        """Write how far it is at every tenth."""
        tenths = 10 * done // total
        if tenths != self._tenths:
            self._tenths = tenths
            complain(f"{done}/{total} visits, {duration(left_s)} left")

    def event(self, text: str, level: str) -> None:
        """Write an event."""
        complain(f"{level}: {text}")

    def end(self) -> None:
        """Do nothing; a log has no line to clear."""


def progress_for_stream() -> TerminalProgress | LogProgress:
    """Return the progress that suits standard error."""
    return TerminalProgress() if sys.stderr.isatty() else LogProgress()
