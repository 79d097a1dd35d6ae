"""The noise of the source itself, a function of time: heads that read at the same time see the same.

It owns how a seed and an instant become a number. Any stretch can be asked for in any order.
"""

import math
from functools import lru_cache

import numpy as np

from rigctl_sim.noise import generator

STATED_FOR_S = 0.1
"""Length of the reading whose standard deviation the noise is stated by."""
CELL_S = 0.005
"""The noise is white in cells of this length. A reading of 100 ms that begins within a cell loses up to 5 % of
its variance."""
BLOCK = 4096
"""Cells drawn at a time."""


class SourceNoise:
    """White relative noise.

    Parameters
    ----------
    relative_sd
        Standard deviation of the mean over `STATED_FOR_S`, relative to the power; that over another stretch is
        as one over the root of its length.
    """

    def __init__(self, seed: int, relative_sd: float) -> None:
        self._seed = seed
        self._cell_sd = relative_sd * math.sqrt(STATED_FOR_S / CELL_S)
        self._block = lru_cache(maxsize=4)(self._drawn)
        self._found = lru_cache(maxsize=64)(self._mean)

    def mean(self, begin_s: float, end_s: float) -> float:
        """Mean of the relative noise over a stretch of time; end after begin."""
        return self._found(begin_s, end_s) if self._cell_sd else 0.0

    def _mean(self, begin_s: float, end_s: float) -> float:
        begin, end = begin_s / CELL_S, end_s / CELL_S
        first, last = math.floor(begin / BLOCK), math.floor(end / BLOCK)
        if first == last:
            walk = self._block(first)
            total = _height(walk, end - first * BLOCK) - _height(walk, begin - first * BLOCK)
        else:
            total = -_height(self._block(first), begin - first * BLOCK)
            total += sum(self._block(number)[BLOCK] for number in range(first, last))
            total += _height(self._block(last), end - last * BLOCK)
        return total / (end - begin)

    def _drawn(self, number: int) -> list[float]:
        """Sum of the noise from the beginning of a block to the edge of each of its cells."""
        cells = generator(self._seed, f"source noise {number}").standard_normal(BLOCK)
        walk: list[float] = np.concatenate(([0.0], np.cumsum(cells) * self._cell_sd)).tolist()
        return walk


def _height(walk: list[float], place: float) -> float:
    """Sum of the noise up to a place within a block, in cells."""
    cell = int(place)
    part = place - cell
    return walk[cell] + part * (walk[cell + 1] - walk[cell]) if part else walk[cell]
