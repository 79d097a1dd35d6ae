"""What a driver says about the language of its wire: how replies end and how a lost step is found again.

It owns the contract only; each driver package brings its own families.
"""

from dataclasses import dataclass
from typing import Protocol

from rigctl.links.channel import Channel


@dataclass(frozen=True, slots=True)
class Resynced:
    """What a resync threw away, and what the instrument complained of: (code, text), oldest first."""

    stale: tuple[bytes, ...] = ()
    complaints: tuple[tuple[int, str], ...] = ()


class Family(Protocol):
    """Framing, resync and safe bytes of one command convention."""

    @property
    def name(self) -> str:
        """What the convention is called."""

    @property
    def reply_timeout_s(self) -> float:
        """How long an ordinary reply may take."""

    @property
    def longest_s(self) -> float:
        """How long the slowest operation may hold a reply back; the deadline of a resync."""

    def resync(self, channel: Channel, deadline_s: float) -> Resynced:
        """Exchange bytes until the next reply is sure to answer the next question.

        Raises `LinkError` where that cannot be had before the deadline.
        """
