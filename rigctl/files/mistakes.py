"""Mistakes of one file, gathered so that all of them are told at once.

It owns the gathering, its bound and the search for the nearest valid word; it knows no format.
"""

import difflib
from collections.abc import Iterable
from itertools import islice
from typing import NoReturn

from rigctl.errors import FileError, Mistake
from rigctl.files.places import Place

MOST = 50
"""Mistakes told of one file; who has more has another problem, and no file may keep us busy for long."""
LONGEST_SHOWN = 60
"""Characters of a text that a message quotes."""
MOST_NAMED = 12
"""Words that a message offers."""
MOST_COMPARED = 1000
"""Words among which the nearest is sought."""
STOPPED = "The rest of the file was not looked at: mend this first."


def nearest_word(word: str, words: Iterable[str]) -> str:
    """Return the valid word most like a wrong one; empty where none is."""
    by_folded = {valid.casefold(): valid for valid in islice(words, MOST_COMPARED)}
    found = difflib.get_close_matches(word[:LONGEST_SHOWN].casefold(), by_folded, n=1)
    return by_folded[found[0]] if found else ""


def quoted(text: object) -> str:
    """Write a text for a message: in quotes, on one line and not too long."""
    line = " ".join(str(text).split())
    return f"'{line}'" if len(line) <= LONGEST_SHOWN else f"'{line[:LONGEST_SHOWN]}...'"


def either(words: Iterable[str]) -> str:
    """Write a choice: `a, b or c`."""
    *others, last = words
    if len(others) >= MOST_NAMED:
        return f"{', '.join(others[:MOST_NAMED])} and {len(others) + 1 - MOST_NAMED} more"
    return f"{', '.join(others)} or {last}" if others else last


class Mistakes:
    """The mistakes of one file, in the order in which they were found."""

    def __init__(self, path: str) -> None:
        self.path = path
        self._found: list[Mistake] = []
        self._told: set[Place] = set()

    @property
    def is_empty(self) -> bool:
        """Whether no mistake was found so far."""
        return not self._found

    def add(self, place: Place, key: str, what: str, *, expected: str = "", nearest: str = "") -> None:
        """Note a mistake, unless one is known at this place already: a later one is most likely its echo.

        Raises `FileError` once there are too many.
        """
        if place not in self._told:
            self._told.add(place)
            self._note(place, key, what, expected=expected, nearest=nearest)

    def add_missing(self, place: Place, key: str, what: str, *, expected: str = "") -> None:
        """Note that something is missing; several things may be, at one place."""
        self._note(place, key, what, expected=expected, nearest="")

    def _note(self, place: Place, key: str, what: str, *, expected: str, nearest: str) -> None:
        line, column = place
        told, near = (" ".join(text.split()) for text in (what, nearest))  # a text may go over several lines
        self._found.append(Mistake(self.path, line, column, key, told, expected=expected, nearest=near))
        if len(self._found) >= MOST:
            self._raise(f"{MOST} mistakes: {STOPPED[0].lower()}{STOPPED[1:]}")

    def stop(self, place: Place, key: str, what: str, *, expected: str = "") -> NoReturn:
        """Note a mistake after which the file cannot be read on, and raise all of them."""
        line, column = place
        self._found.append(Mistake(self.path, line, column, key, what, expected=expected))
        self._raise(STOPPED)

    def refuse(self, what: str, *, expected: str = "") -> NoReturn:
        """Raise what is wrong with the file as a whole, or what was found before."""
        self.raise_if_any()
        raise FileError([Mistake(self.path, 0, 0, "", what, expected=expected)])

    def raise_if_any(self) -> None:
        """Raise `FileError` with every mistake found, in the order of the file."""
        if self._found:
            self._raise("")

    def _raise(self, note: str) -> NoReturn:
        raise FileError(sorted(self._found, key=lambda m: (m.line, m.column)), note=note) from None
