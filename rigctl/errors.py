"""Every error that polrig raises on purpose, grouped by what a person can do about it.

It owns the tree and the exit codes; it never prints and never catches.

    PolrigError                      70
    ├── PlanError                     2   mend what was written; nothing was sent
    │   ├── UsageError                2   mend the command line
    │   ├── QuantityError             2   a text is no quantity; carries what was expected
    │   └── FileError                 2   mend the recipe or rig file; carries every mistake with its place
    ├── InstrumentError               3   look at the bench
    │   ├── LinkError                 3
    │   │   ├── LinkTimeoutError      3   no complete reply in time; carries the partial bytes
    │   │   ├── DisconnectedError     3   nobody there, or gone
    │   │   ├── FramingError          3   bytes that are no reply
    │   │   └── BusyError             3   the address is in use by another program
    │   ├── RefusedError              3   the instrument said no; carries its code and text
    │   ├── WrongInstrumentError      3   another instrument answers at this address
    │   └── MotionError               3   alarm, lost position or a mount that does not arrive
    ├── LimitError                    4   a limit refused it; nothing beyond the limit was sent
    ├── RecordError                   5   the run file or the disk
    ├── StopRequestedError            6   stopped on purpose; the file can be resumed
    ├── NotSafeError                  7   the beam could not be confirmed off or blocked
    ├── UndecidedError                8   the data do not decide what was asked
    └── DamagedFileError              9   the file is not whole, or changed
"""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import ClassVar


class PolrigError(Exception):
    """An error with what happened, where, and what to do; the root of the tree."""

    exit_code: ClassVar[int] = 70

    def __init__(self, what: str, *, where: str = "", do: str = "") -> None:
        self.what, self.where, self.do = what, where, do
        super().__init__(what)

    def __str__(self) -> str:
        place = f"{self.where}: " if self.where else ""
        return f"{place}{self.what}" + (f"\n  {self.do}" if self.do else "")


class PlanError(PolrigError):
    """What was asked for cannot be done as written; nothing was sent."""

    exit_code = 2


class UsageError(PlanError):
    """The command line is wrong."""


class QuantityError(PlanError):
    """A text is not a quantity of the kind wanted; `nearest` is a text that would do, or empty."""

    def __init__(self, what: str, *, expected: str, nearest: str = "") -> None:
        self.expected, self.nearest = expected, nearest
        guess = f"; did you mean '{nearest}'?" if nearest else ""
        super().__init__(what, do=f"Expected {expected}{guess}")


@dataclass(frozen=True, slots=True)
class Mistake:
    """One mistake of a file; line and column count from 1, and line 0 stands for the file as a whole."""

    path: str
    line: int
    column: int
    key: str
    what: str
    expected: str = ""
    nearest: str = ""

    def __str__(self) -> str:
        expected = f"; expected {self.expected}" if self.expected else ""
        nearest = f"; did you mean '{self.nearest}'?" if self.nearest else ""
        place = f":{self.line}:{self.column}" if self.line else ""
        return f"{self.path}{place}: {self.what}{expected}{nearest}"


class FileError(PlanError):
    """A file that people write has mistakes; all of them are told at once."""

    def __init__(self, mistakes: Sequence[Mistake], *, note: str = "") -> None:
        self.mistakes = tuple(mistakes)
        super().__init__("\n".join([*map(str, self.mistakes), *([note] if note else [])]))


class InstrumentError(PolrigError):
    """An instrument failed; the bench was made safe."""

    exit_code = 3


class LinkError(InstrumentError):
    """The way to one address failed."""

    def __init__(self, what: str, *, address: str, partial: bytes = b"", do: str = "") -> None:
        self.address, self.partial = address, partial
        super().__init__(what, where=address, do=do)


class LinkTimeoutError(LinkError):
    """No complete reply before the deadline; `partial` holds what did come."""


class DisconnectedError(LinkError):
    """Nobody listens at the address, or the connection is gone."""


class FramingError(LinkError):
    """Bytes that are not a reply of this family; `partial` holds them."""


class BusyError(LinkError):
    """Another program holds the address."""


class RefusedError(InstrumentError):
    """The instrument refused a command; its error queue was drained."""

    def __init__(self, what: str, *, address: str, code: int, text: str, do: str = "") -> None:
        self.address, self.code, self.text = address, code, text
        super().__init__(what, where=address, do=do)


class WrongInstrumentError(InstrumentError):
    """Something else than the rig file says answers at an address."""


class MotionError(InstrumentError):
    """A mount raised an alarm, lost its place or did not arrive."""


class LimitError(PolrigError):
    """A limit refused a setpoint; nothing beyond the limit was sent."""

    exit_code = 4


class RecordError(PolrigError):
    """The run file or its disk failed; the bench was made safe."""

    exit_code = 5


class StopRequestedError(PolrigError):
    """Stopped on purpose."""

    exit_code = 6


class NotSafeError(PolrigError):
    """The beam could not be confirmed off or blocked: go and look."""

    exit_code = 7


class UndecidedError(PolrigError):
    """The data do not decide what was asked of them."""

    exit_code = 8


class DamagedFileError(PolrigError):
    """A run file is not whole, or its measured data changed since it was closed."""

    exit_code = 9
