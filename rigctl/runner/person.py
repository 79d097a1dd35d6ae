"""Where the runner needs somebody's hands.

It owns the contract only; the command line has a person at a terminal, a rehearsal a simulated one.
"""

from typing import Protocol


class Person(Protocol):
    """Somebody beside the bench."""

    def block_beam(self) -> None:
        """Ask for something opaque in the beam at the source; returns when it is there."""

    def clear_beam(self) -> None:
        """Ask for it to be taken away; returns when it is gone."""


class NobodyThere:
    """A run that needs no hands; asking anyway is a bug."""

    def block_beam(self) -> None:
        """Refuse."""
        raise AssertionError("a dark by hand was planned although nobody is there")

    def clear_beam(self) -> None:
        """Refuse."""
        raise AssertionError("a dark by hand was planned although nobody is there")
