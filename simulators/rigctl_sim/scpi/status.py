"""Error queue and status registers of IEEE 488.2 chapter 11 and SCPI-1999 volume 1, chapter 9.

It owns what `*ESR?`, `*STB?`, `STATus` and `SYSTem:ERRor` look at; it knows no command.
"""

from collections import deque
from dataclasses import dataclass, field

from rigctl_sim.scpi.complaint import TEXTS

QUEUE_LENGTH = 20
"""Entries of the error queue; SCPI-1999 volume 2, 21.8.1 asks for at least two."""
OPERATION_COMPLETE = 0x01
POWER_ON = 0x80
_MAV, _ESB, _MSS = 0x10, 0x20, 0x40


def _event_bit(code: int) -> int:
    """Bit of the standard event register for a class of errors: IEEE 488.2, 11.5.1.1."""
    if -200 < code <= -100:
        return 0x20
    if -300 < code <= -200:
        return 0x10
    if -500 < code <= -400:
        return 0x04
    return 0x08


@dataclass(slots=True)
class Register:
    """A condition with its event and enable registers; an event latches when a condition bit rises."""

    condition: int = 0
    event: int = 0
    enable: int = 0
    _holders: dict[int, set[int]] = field(default_factory=dict)

    def set_bit(self, bit: int, is_set: bool, *, channel: int = 1) -> None:
        """Set or clear one bit of the condition, by its weight; it stays set while any channel sets it."""
        holders = self._holders.setdefault(bit, set())
        if is_set == (channel in holders):
            return
        if is_set:
            holders.add(channel)
        else:
            holders.discard(channel)
        if not self.condition & bit:
            self.event |= bit
        self.condition = self.condition | bit if holders else self.condition & ~bit

    def read_event(self) -> int:
        """Return the event register and clear it."""
        event, self.event = self.event, 0
        return event

    @property
    def is_reported(self) -> bool:
        """Whether an enabled event is latched."""
        return bool(self.event & self.enable)


@dataclass(slots=True)
class Status:
    """The status of one instrument, as after power-on."""

    standard_event: int = POWER_ON
    event_enable: int = 0
    service_enable: int = 0
    operation: Register = field(default_factory=Register)
    questionable: Register = field(default_factory=Register)
    errors: deque[int] = field(default_factory=deque)

    def complain(self, code: int) -> None:
        """Put an error into the queue; a full queue ends with -350 instead (SCPI-1999 volume 2, 21.8.1)."""
        self.standard_event |= _event_bit(code)
        if len(self.errors) < QUEUE_LENGTH:
            self.errors.append(code)
        else:
            self.errors[-1] = -350

    def next_error(self) -> str:
        """Take the oldest error out of the queue, as `SYSTem:ERRor?` answers."""
        code = self.errors.popleft() if self.errors else 0
        return f'{code},"{TEXTS[code]}"'

    def read_standard_event(self) -> int:
        """Return the standard event register and clear it."""
        event, self.standard_event = self.standard_event, 0
        return event

    def clear(self) -> None:
        """Do what `*CLS` does: IEEE 488.2, 10.3."""
        self.standard_event = self.operation.event = self.questionable.event = 0
        self.errors.clear()

    def preset(self) -> None:
        """Do what `STATus:PRESet` does."""
        self.operation.enable = self.questionable.enable = 0

    def byte(self, has_message: bool) -> int:
        """Return the status byte, bit 6 as master summary: IEEE 488.2, 11.2; SCPI-1999 volume 1, 9.1."""
        byte = (
            (0x04 if self.errors else 0)
            | (0x08 if self.questionable.is_reported else 0)
            | (_MAV if has_message else 0)
            | (_ESB if self.standard_event & self.event_enable else 0)
            | (0x80 if self.operation.is_reported else 0)
        )
        return byte | (_MSS if byte & self.service_enable else 0)
