"""What the runner tells while it works.

It owns the contract; the command line draws it. Telling must never fail the run.
"""

from typing import Literal, Protocol

Level = Literal["info", "warning", "error"]


class Progress(Protocol):
    """Listens to a run."""

    def phase(self, what: str) -> None:
        """Tell that another part of the run begins."""

    def visit(self, done: int, total: int, left_s: float) -> None:
        """Tell that a visit was recorded, and the time left, s."""

    def event(self, text: str, level: Level) -> None:
        """Tell something that the run file keeps as well."""


class Silent:
    """Tells nobody."""

    def phase(self, what: str) -> None:
        """Do nothing."""

    def visit(self, done: int, total: int, left_s: float) -> None:
        """Do nothing."""

    def event(self, text: str, level: Level) -> None:
        """Do nothing."""
