"""Parameters of commands: text to value, by the data types of SCPI-1999 volume 1, chapter 7.

Each maker returns a function from the text of one parameter to its value. Such a function raises `Complaint`
and knows nothing of the instrument's state, so a parsed command may be kept.
"""

import math
import re
from collections.abc import Callable, Mapping
from typing import TypeVar

from rigctl_sim.scpi.complaint import Complaint
from rigctl_sim.scpi.mnemonic import forms

T = TypeVar("T")
Parameter = Callable[[str], object]

_DECIMAL = re.compile(r"([+-]?(?:\d+\.?\d*|\.\d+)(?:\s*[Ee]\s*[+-]?\d+)?)\s*([A-Za-z]*)")
_OTHER_BASE = re.compile(r"#(?:[Hh]([0-9A-Fa-f]+)|[Qq]([0-7]+)|[Bb]([01]+))")
_WORD = re.compile(r"[A-Za-z][A-Za-z0-9_]*")
_CHANNELS = re.compile(r"\(\s*@\s*(.*?)\s*\)")
_CHANNEL = re.compile(r"(\d+)(?:\s*:\s*(\d+))?")
_LARGEST_LIST = 1000

MULTIPLIERS: Mapping[str, float] = {
    "": 1.0,
    "G": 1e9,
    "MA": 1e6,
    "K": 1e3,
    "M": 1e-3,
    "U": 1e-6,
    "N": 1e-9,
    "P": 1e-12,
}
"""Prefixes of suffixes: IEEE 488.2, table 7-2. `M` is milli, `MA` is mega."""


def number(unit: str, low: float, high: float, *, default: float) -> Parameter:
    """Make a reader of numbers between two bounds; `MINimum`, `MAXimum` and `DEFault` name them.

    Parameters
    ----------
    unit
        The suffix without prefix, in capitals; empty where none is allowed.
    """
    named = _by_form({"MINimum": low, "MAXimum": high, "DEFault": default})
    # the bounds themselves must pass whatever rounding the prefix brought
    rounding = 1e-12 * max(abs(low), abs(high))

    def read(text: str) -> float:
        if _WORD.fullmatch(text):
            if text.upper() not in named:
                raise Complaint(-141)
            return named[text.upper()]
        value = _number(text, unit)
        if not low - rounding <= value <= high + rounding:
            raise Complaint(-222)
        return value

    return read


def whole_number(low: int, high: int, *, default: int) -> Parameter:
    """Make a reader of whole numbers; others are rounded as IEEE 488.2, 7.7.2.4 asks."""
    read_number = number("", low, high, default=default)

    def read(text: str) -> int:
        value = read_number(text)
        assert isinstance(value, float | int)
        return math.floor(value + 0.5)

    return read


def boolean(text: str) -> bool:
    """Read `ON`, `OFF` or a number, which is rounded: SCPI-1999 volume 1, 7.3."""
    if text.upper() in ("ON", "OFF"):
        return text.upper() == "ON"
    if _WORD.fullmatch(text):
        raise Complaint(-141)
    return abs(_number(text, "")) >= 0.5


def choice(*words: str) -> Parameter:
    """Make a reader of words given as the standard prints them, `IMMediate`; it returns them as printed."""
    named = _by_form({word: word for word in words})

    def read(text: str) -> str:
        if not _WORD.fullmatch(text):
            raise Complaint(-104)
        if text.upper() not in named:
            raise Complaint(-224)
        return named[text.upper()]

    return read


def range_or_word(text: str) -> str:
    """Keep `MINimum`, `MAXimum` or `DEFault` of a query as MIN, MAX or DEF."""
    named = _by_form({"MINimum": "MIN", "MAXimum": "MAX", "DEFault": "DEF"})
    if text.upper() not in named:
        raise Complaint(-141)
    return named[text.upper()]


def channel_list(count: int) -> Parameter:
    """Make a reader of channel lists such as `(@1,3:5)` over so many channels: SCPI-1999 volume 1, 8.3.2."""

    def read(text: str) -> tuple[int, ...]:
        whole = _CHANNELS.fullmatch(text)
        if whole is None:
            raise Complaint(-170 if text.startswith("(") else -104)
        channels = [channel for part in whole[1].split(",") for channel in _channels(part.strip())]
        if not all(1 <= channel <= count for channel in channels):
            raise Complaint(-222)
        return tuple(channels)

    return read


def _channels(part: str) -> range:
    match = _CHANNEL.fullmatch(part)
    if match is None:
        raise Complaint(-170)
    first, last = int(match[1]), int(match[2] or match[1])
    if abs(last - first) > _LARGEST_LIST:
        raise Complaint(-222)
    # a range may be written downwards and is then worked through downwards
    return range(first, last + 1) if first <= last else range(first, last - 1, -1)


def _number(text: str, unit: str) -> float:
    if other := _OTHER_BASE.fullmatch(text):
        return float(int(other[1], 16) if other[1] else int(other[2], 8) if other[2] else int(other[3], 2))
    match = _DECIMAL.fullmatch(text)
    if match is None:
        raise Complaint(_wrong_type(text))
    return float("".join(match[1].split())) * _multiplier(match[2].upper(), unit)


def _multiplier(suffix: str, unit: str) -> float:
    if not suffix:
        return 1.0
    if not unit:
        raise Complaint(-138)
    prefix = suffix.removesuffix(unit)
    if not suffix.endswith(unit) or prefix not in MULTIPLIERS:
        raise Complaint(-131)
    return MULTIPLIERS[prefix]


def _wrong_type(text: str) -> int:
    if re.match(r"#\d", text):
        return -168
    return -120 if re.match(r"[+\-.\d#]", text) else -104


def _by_form(values: Mapping[str, T]) -> dict[str, T]:
    return {form: value for word, value in values.items() for form in forms(word)}
