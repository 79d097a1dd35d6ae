"""Other settings of the unknowns that give the very same readings of the sweep at hand.

It owns the moves that are tried and the choice among equivalent solutions; no symmetry is assumed: each
is found by comparing readings at two points that are nowhere special.
"""

from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from itertools import combinations, product
from typing import TypeAlias

import numpy as np

from rigctl.optics.forward import unit_light
from rigctl.optics.parts import Quantity, base_of
from rigctl.optics.train import Train
from rigctl.optics.visits import Visits
from rigctl.polarimetry.coordinates import WIDTHS, changes_with_warmth, probes

EIGHTH_DEG = 45.0
SAME = 1e-10  # of the light
MOST_TOGETHER = 3  # quantities moved at once, each at all its levels
Move: TypeAlias = tuple[int, ...]  # per unknown: eighths of a turn, or 1 for a retardance reflected


@dataclass(frozen=True, slots=True)
class _Unknown:
    """A quantity that is moved.

    Parameters
    ----------
    quantity
        As people wrote it.
    companion
        The temperature coefficient that must follow, if there is one to follow.
    has_orders
        Whether a whole period more is the same.
    """

    quantity: Quantity
    companion: str | None
    has_orders: bool

    @property
    def order(self) -> int:
        """How many moves there are before the first comes again."""
        return 4 if self.quantity.kind == "angle" else 2

    def moved(self, values: Mapping[str, float], k: int, *, is_home: bool = False) -> dict[str, float]:
        """The moved value; where it is brought home, by whole periods as near to the nominal one as can be."""
        name, before = self.quantity.name, values[self.quantity.name]
        is_angle = self.quantity.kind == "angle"
        turn = k * EIGHTH_DEG if is_angle else k
        after = before + turn if is_angle or not k else 1.0 - before
        if is_home and self.has_orders:
            period = 180.0 if is_angle else 1.0
            after -= period * round((after - self.quantity.value) / period)
        if self.companion is None or after == before:
            return {name: after}
        # What grows by c r for each kelvin must go on doing so, or shrink by it once it is reflected.
        slope = (-1.0 if k else 1.0) * before * values[self.companion]
        return {name: after, self.companion: slope / (after or np.finfo(float).tiny)}

    def distance(self, values: Mapping[str, float]) -> float:
        """How far from the nominal value, in tolerances, squared."""
        scaled = (values[self.quantity.name] - self.quantity.value) / (self.quantity.u or WIDTHS[self.quantity.kind])
        return round(scaled**2, 9)  # of two equally near the first, whatever the rounding

    def words(self, k: int) -> str:
        """One move of it, in words."""
        if self.quantity.kind == "angle":
            return f"{self.quantity.name} + {EIGHTH_DEG * k:g} deg"
        return f"{self.quantity.name} -> 1 - it"


@dataclass(frozen=True, slots=True)
class Symmetries:
    """The symmetries of a sweep.

    Parameters
    ----------
    items
        What can be moved.
    found
        The moves found, each the first of all that follow from it.
    alone
        By unknown: its moves that are symmetries whatever the others do.
    together
        The others, with all that follow from them; the first moves nothing.
    """

    items: tuple[_Unknown, ...]
    found: tuple[Move, ...]
    alone: tuple[tuple[int, ...], ...]
    together: tuple[Move, ...]

    @property
    def unknowns(self) -> tuple[Quantity, ...]:
        """What can be moved, as people wrote it."""
        return tuple(item.quantity for item in self.items)

    def sentences(self) -> tuple[str, ...]:
        """The moves found, in words."""
        return tuple(
            " with ".join(item.words(k) for item, k in zip(self.items, move, strict=True) if k) for move in self.found
        )

    def nearest(self, values: Mapping[str, float]) -> dict[str, float]:
        """Of all equivalent solutions the one nearest to the nominal values, in tolerances."""
        images = [self._nearest_after(values, move) for move in self.together]
        closest = min(images, key=self.distance)
        return {**values, **closest}

    def _nearest_after(self, values: Mapping[str, float], move: Move) -> dict[str, float]:
        """The nearest of those that are one move and any of those alone away."""
        image: dict[str, float] = {}
        for item, k, alone in zip(self.items, move, self.alone, strict=True):
            choices = [item.moved(values, (k + more) % item.order, is_home=True) for more in alone]
            closest = min(choices, key=item.distance)
            image |= closest
        return image

    def distance(self, values: Mapping[str, float]) -> float:
        """How far from the nominal values, in tolerances, squared."""
        return sum(item.distance(values) for item in self.items)


def symmetries(train: Train, visits: Visits) -> Symmetries:
    """Find the symmetries of a sweep.

    Parameters
    ----------
    train
        As people wrote it, with its levels.
    visits
        The sweep.
    """
    items = tuple(_unknowns(train))
    is_still = _comparison(train, visits, items)
    found: list[Move] = []
    alone: list[set[int]] = [{0} for _ in items]
    for k, item in enumerate(items):
        for turn in range(1, item.order):
            move = tuple(turn if place == k else 0 for place in range(len(items)))
            if turn not in alone[k] and is_still(move):
                found.append(move)
                alone[k] = {(one + times * turn) % item.order for one in alone[k] for times in range(item.order)}
    together: set[Move] = {(0,) * len(items)}
    for move in _moves(items):
        if not _follows(move, alone, together, items) and is_still(move):
            found.append(move)
            together = _closed(together, move, items)
    return Symmetries(items, tuple(found), tuple(tuple(sorted(moves)) for moves in alone), tuple(sorted(together)))


def _unknowns(train: Train) -> Iterator[_Unknown]:
    warm = {e.strength: e for e in train.elements if changes_with_warmth(train, e)}
    for quantity in train.fitted:
        if quantity.prior_u is not None or quantity.kind not in {"angle", "retardance"}:
            continue
        element = warm.get(base_of(quantity.name))
        if element is None:
            yield _Unknown(quantity, None, has_orders=True)
            continue
        coefficient = train.quantities[element.temperature_coefficient or ""]
        is_shared = quantity.name == element.strength and coefficient.each is None
        follows = is_shared and coefficient.is_fitted and coefficient.prior_u is None
        yield _Unknown(quantity, coefficient.name if follows else None, has_orders=follows)


def _moves(items: Sequence[_Unknown]) -> list[Move]:
    """Moves of a few quantities at once, each at all its levels; the simplest first."""
    bases = list(dict.fromkeys(base_of(item.quantity.name) for item in items))
    orders = {base_of(item.quantity.name): item.order for item in items}
    moves = [
        tuple(dict(zip(chosen, turns, strict=True)).get(base_of(item.quantity.name), 0) for item in items)
        for count in range(1, MOST_TOGETHER + 1)
        for chosen in combinations(bases, count)
        for turns in product(*(range(1, orders[base]) for base in chosen))
    ]
    return sorted(moves, key=lambda move: (np.count_nonzero(move), sum(move)))


def _comparison(train: Train, visits: Visits, items: Sequence[_Unknown]) -> Callable[[Move], bool]:
    """Whether a move leaves the light of all visits as it is."""
    points = [(x, unit_light(train, visits, x)) for x in probes(train)]

    def is_still(move: Move) -> bool:
        for x, light in points:
            image = dict(x)
            for item, k in zip(items, move, strict=True):
                image |= item.moved(x, k)
            moved = unit_light(train, visits, image)
            if any(float(np.max(np.abs(moved[d] - seen), initial=0.0)) > SAME for d, seen in light.items()):
                return False
        return True

    return is_still


def _follows(move: Move, alone: Sequence[set[int]], together: Iterable[Move], items: Sequence[_Unknown]) -> bool:
    """Whether a move is one of those together and some of those alone."""
    return any(
        all((a - b) % item.order in own for a, b, own, item in zip(move, one, alone, items, strict=True))
        for one in together
    )


def _closed(together: Iterable[Move], move: Move, items: Sequence[_Unknown]) -> set[Move]:
    """The moves together with one more and all that follow from it."""
    multiples = [tuple(times * k for k in move) for times in range(4)]
    pairs = product(together, multiples)
    return {tuple((a + b) % item.order for a, b, item in zip(one, other, items, strict=True)) for one, other in pairs}
