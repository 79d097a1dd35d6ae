"""Labelled arrays: a variable with its dimensions and attributes, and the frame that a table's variables
share."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import numpy.typing as npt

from rigctl.record.layout import Header
from rigctl.record.names import free_names

Array = npt.NDArray[Any]


@dataclass(frozen=True, slots=True)
class Variable:
    """An array with the names of its dimensions and its attributes (units, meaning)."""

    name: str
    dims: tuple[str, ...]
    values: Array
    attributes: Mapping[str, Any] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class Frame:
    """Dimensions of a table, and the flat places in it where something was measured."""

    dims: tuple[str, ...]
    shape: tuple[int, ...]
    places: Sequence[int]
    header: Header

    def fill(self, values: Sequence[float] | Array, *, dtype: Any = float, empty: float = np.nan) -> Array:
        """Return an array that has a value (or a row of them) at each place and `empty` elsewhere."""
        row = values.shape[1:] if isinstance(values, np.ndarray) else ()
        flat = np.full((int(np.prod(self.shape)), *row), empty, dtype)
        flat[list(self.places)] = values
        return flat.reshape(*self.shape, *row)

    def at(self, places: Sequence[int]) -> "Frame":
        """Return the same frame for other places."""
        return Frame(self.dims, self.shape, places, self.header)

    def times(self, times_s: Sequence[float]) -> Variable:
        """Return the middles of the dwells as instants that xarray decodes."""
        units = f"seconds since {self.header.start.isoformat()}"
        attributes = {"units": units, "long_name": "middle of the dwell"}
        return Variable("time", self.dims, self.fill(times_s), attributes)

    def words(self, name: str, said: Sequence[int], words: Sequence[str], meaning: str) -> Variable:
        """Return numbers that stand for words, 0 where nothing was measured."""
        values = self.fill(said, dtype=np.int16, empty=0)
        return Variable(name, self.dims, values, flag_words(words) | {"long_name": meaning})

    def truths(self, name: str, said: Sequence[bool | None], meaning: str) -> Variable:
        """Return 1 for yes, 0 for no, -1 where nobody said."""
        values = self.fill([-1 if answer is None else int(answer) for answer in said], dtype=np.int8, empty=-1)
        words = {"flag_values": np.array([-1, 0, 1], np.int8), "flag_meanings": "unknown no yes"}
        return Variable(name, self.dims, values, words | {"long_name": meaning})


def flag_words(words: Sequence[str]) -> dict[str, Any]:
    """Return the attributes of numbers that stand for words, counted from 0.

    Source
    ------
    CF conventions 1.11, section 3.5 "Flags".
    """
    return {
        "flag_values": np.arange(len(words), dtype=np.int16),
        "flag_meanings": " ".join(free_names(words)),
    }
