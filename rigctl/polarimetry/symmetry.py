"""Other settings of the unknowns that give the very same readings of the sweep at hand.

It owns the moves that are tried and the choice among equivalent solutions; no symmetry is assumed: each
is found by comparing readings at two points that are nowhere special.
"""

from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass
from itertools import product
from typing import TypeAlias

import numpy as np

from rigctl.optics.forward import unit_light
from rigctl.optics.parts import Quantity
from rigctl.optics.train import Train
from rigctl.optics.visits import Visits
from rigctl.polarimetry.coordinates import WIDTHS, probes

EIGHTH_DEG = 45.0
SAME = 1e-10  # of the light
MOST_TOGETHER = 3  # unknowns moved at once
Move: TypeAlias = tuple[int, ...]  # per unknown: eighths of a turn, or 1 for a retardance reflected


@dataclass(frozen=True, slots=True)
class Symmetries:
    """The symmetries of a sweep: what is moved, the moves found, and all that follow from them."""

    unknowns: tuple[Quantity, ...]
    found: tuple[Move, ...]
    group: tuple[Move, ...]

    def sentences(self) -> tuple[str, ...]:
        """The moves found, in words."""
        return tuple(
            " with ".join(_words(q, k) for q, k in zip(self.unknowns, move, strict=True) if k) for move in self.found
        )

    def nearest(self, values: Mapping[str, float]) -> dict[str, float]:
        """Of all equivalent solutions the one nearest to the nominal values, in tolerances."""
        images = [self._image(values, move) for move in self.group]
        closest = min(images, key=self._distance)
        return {**values, **closest}

    def _image(self, values: Mapping[str, float], move: Move) -> dict[str, float]:
        return {q.name: _moved_home(q, values[q.name], k) for q, k in zip(self.unknowns, move, strict=True)}

    def _distance(self, values: dict[str, float]) -> float:
        scaled = [(values[q.name] - q.value) / (q.u or WIDTHS[q.kind]) for q in self.unknowns]
        return round(sum(d * d for d in scaled), 9)  # of two equally near the first, whatever the rounding


def symmetries(train: Train, visits: Visits) -> Symmetries:
    """Find the symmetries of a sweep.

    Parameters
    ----------
    train
        As people wrote it.
    visits
        The sweep.
    """
    unknowns = tuple(q for q in train.fitted if q.prior_u is None and q.kind in {"angle", "retardance"})
    orders = [4 if q.kind == "angle" else 2 for q in unknowns]
    moves = [m for m in product(*map(range, orders)) if 0 < np.count_nonzero(m) <= MOST_TOGETHER]
    still = _comparison(train, visits, unknowns)
    found: list[Move] = []
    group: set[Move] = {(0,) * len(orders)}
    for move in sorted(moves, key=lambda m: (np.count_nonzero(m), sum(m))):
        if move not in group and still(move):
            found.append(move)
            group = _closed(group, move, orders)
    return Symmetries(unknowns, tuple(found), tuple(sorted(group)))


def _comparison(train: Train, visits: Visits, unknowns: Sequence[Quantity]) -> Callable[[Move], bool]:
    """Whether a move leaves the light of all visits as it is."""
    points = [(x, unit_light(train, visits, x)) for x in probes(train)]

    def is_still(move: Move) -> bool:
        for x, light in points:
            image = {q.name: _moved(q, x[q.name], k) for q, k in zip(unknowns, move, strict=True)}
            moved = unit_light(train, visits, {**x, **image})
            if any(float(np.max(np.abs(moved[d] - seen), initial=0.0)) > SAME for d, seen in light.items()):
                return False
        return True

    return is_still


def _closed(group: Iterable[Move], move: Move, orders: Sequence[int]) -> set[Move]:
    """The group with one more move and all that follow from it."""
    multiples = [tuple(times * k for k in move) for times in range(4)]
    pairs = product(group, multiples)
    return {tuple((a + b) % n for a, b, n in zip(one, other, orders, strict=True)) for one, other in pairs}


def _moved(quantity: Quantity, value: float, k: int) -> float:
    if quantity.kind == "angle":
        return value + EIGHTH_DEG * k
    return 1.0 - value if k else value


def _moved_home(quantity: Quantity, value: float, k: int) -> float:
    """The moved value, by whole periods as near to the nominal one as can be."""
    period = 180.0 if quantity.kind == "angle" else 1.0
    moved = _moved(quantity, value, k)
    return moved - period * round((moved - quantity.value) / period)


def _words(quantity: Quantity, k: int) -> str:
    if quantity.kind == "angle":
        return f"{quantity.name} + {EIGHTH_DEG * k:g} deg"
    return f"{quantity.name} -> 1 - it"
