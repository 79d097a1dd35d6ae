"""What a driver says about the language of its wire: how it is opened, how replies end, how a lost step is found.

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


@dataclass(frozen=True, slots=True)
class Opening:
    """What opening a serial line does to the devices of a convention.

    `asserts_dtr` is whether DTR and RTS are raised, which restarts many a board. `quiet_s` is how long a device
    that restarts is deaf; what it says meanwhile is thrown away.
    """

    asserts_dtr: bool = True
    quiet_s: float = 0.0


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

    @property
    def opening(self) -> Opening:
        """How a serial line to such a device is opened."""

    def resync(self, channel: Channel, deadline_s: float) -> Resynced:
        """Exchange bytes until the next reply is sure to answer the next question.

        Raises `LinkError` where that cannot be had before the deadline.
        """
