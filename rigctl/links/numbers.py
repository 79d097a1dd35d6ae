"""Numbers as instruments write them.

It owns the difference between a reading and what only looks like one: an overload, an underload and a
not-a-number come as numbers of a size that no reading has, and never pass as readings.
"""

import math
import re
from dataclasses import dataclass
from enum import Enum

from rigctl.errors import FramingError

_REAL = re.compile(r"[+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[Ee][+-]?[0-9]+)?")

_INFINITY = 9.9e37
_NAN = 9.91e37
_PRINTED = 1e-6  # relative; seven digits are enough to print either number apart from the other


class NotAReading(Enum):
    """What a number that is no reading stands for."""

    OVER = "over"
    UNDER = "under"
    NAN = "not a number"


@dataclass(frozen=True, slots=True)
class Real:
    """A number off the wire: its value, or NaN and the flag that stands in its place."""

    value: float
    flag: NotAReading | None = None


def parse_real(text: str, *, address: str) -> Real:
    """Read one decimal number, in any of the forms NR1, NR2 and NR3.

    Parameters
    ----------
    text
        The number; blanks around it are allowed.
    address
        Where it came from, for the `FramingError` that anything else raises.

    Source
    ------
    IEEE 488.2-1992, NR1, NR2 and NR3 response data; SCPI-1999 volume 1, 7.2.1: infinity is 9.9E37, minus
    infinity -9.9E37, not a number 9.91E37. From memory.
    """
    bare = text.strip()
    if not _REAL.fullmatch(bare):
        raise FramingError(
            f"'{bare[:80]}' is no number",
            address=address,
            partial=text.encode("utf-8", "replace"),
            do="check that the driver fits this instrument and its firmware",
        )
    value = float(bare)
    flag = _flag(value)
    return Real(value) if flag is None else Real(math.nan, flag)


def _flag(value: float) -> NotAReading | None:
    size = abs(value)
    if size < _INFINITY * (1.0 - _PRINTED):
        return None
    if abs(size - _NAN) <= _NAN * _PRINTED:
        return NotAReading.NAN
    return NotAReading.OVER if value > 0.0 else NotAReading.UNDER
