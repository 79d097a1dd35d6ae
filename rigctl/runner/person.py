"""Where the runner needs somebody's hands.

It owns the contract only; the command line has a person at a terminal, a rehearsal a simulated one.
"""

from typing import Protocol


class Person(Protocol):
    """Somebody beside the bench."""

    @property
    def is_there(self) -> bool:
        """Whether anybody can be asked at all."""

    def block_beam(self) -> None:
        """Ask for something opaque in the beam at the source; returns when it is there."""

    def clear_beam(self) -> None:
        """Ask for it to be taken away; returns when it is gone."""

    def cap_detectors(self) -> None:
        """Ask for a cap on every detector; returns when they are on."""

    def uncap_detectors(self) -> None:
        """Ask for the caps to be taken off."""

    def take_out(self, element: str) -> None:
        """Ask for an element to be taken out of the beam; returns when it is out."""

    def put_in(self, element: str) -> None:
        """Ask for an element to be put back where it was."""


class NobodyThere:
    """A run that needs no hands; asking anyway is a bug."""

    is_there = False

    def block_beam(self) -> None:
        """Refuse."""
        raise _nobody()

    def clear_beam(self) -> None:
        """Refuse."""
        raise _nobody()

    def cap_detectors(self) -> None:
        """Refuse."""
        raise _nobody()

    def uncap_detectors(self) -> None:
        """Refuse."""
        raise _nobody()

    def take_out(self, element: str) -> None:  # noqa: ARG002  # nobody hears it
        """Refuse."""
        raise _nobody()

    def put_in(self, element: str) -> None:  # noqa: ARG002
        """Refuse."""
        raise _nobody()


def _nobody() -> AssertionError:
    return AssertionError("somebody's hands were planned although nobody is there")
