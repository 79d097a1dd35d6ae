"""Which elements stand in the beam, as functions of time.

It owns what takes an element out: slides, mounts that flip it, and people. It knows no light.
"""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Protocol

from rigctl_sim.trajectory import Trajectory

HAND_S = 0.1
"""How long it takes to put something into the beam or take it out; only what is before and after matters."""
ALL_IN: Mapping[frozenset[str], float] = {frozenset(): 1.0}
_IN_UNTIL, _OUT_FROM = 0.25, 0.75


class Holder(Protocol):
    """What holds an element in the beam or beside it."""

    @property
    def moves(self) -> Trajectory:
        """What moves with it."""

    def part_in(self, instant_s: float) -> float:
        """Part of the beam that goes through the element at an instant, 0 to 1."""


@dataclass(frozen=True, slots=True)
class Carried:
    """An element on a slide, or in a hand: 1 is in, 0 is out."""

    moves: Trajectory

    def part_in(self, instant_s: float) -> float:
        """Part of the beam that goes through the element at an instant."""
        return self.moves(instant_s)


@dataclass(frozen=True, slots=True)
class Flipped:
    """An element that a mount turns out of the beam; `sense` is -1 where the dial counts against the bench.

    A quarter of the way leaves it in and the last quarter out, so that no mount has to stand to the last digit.
    """

    moves: Trajectory
    sense: float
    in_deg: float
    out_deg: float

    def part_in(self, instant_s: float) -> float:
        """Part of the beam that goes through the element at an instant."""
        way = (self.sense * self.moves(instant_s) - self.in_deg) / (self.out_deg - self.in_deg)
        return min(max((_OUT_FROM - way) / (_OUT_FROM - _IN_UNTIL), 0.0), 1.0)


class Presence:
    """Who is in the beam."""

    def __init__(self, holders: Mapping[str, Holder]) -> None:
        self._holders: dict[str, list[Holder]] = {name: [holder] for name, holder in holders.items()}
        self._hands: dict[str, Trajectory] = {}

    def take_out_by_hand(self, element: str, is_out: bool, now_s: float) -> None:
        """Somebody takes an element out of the beam, or puts it back."""
        if element not in self._hands:
            hand = self._hands[element] = Trajectory(1.0)
            self._holders.setdefault(element, []).append(Carried(hand))
        self._hands[element].glide(now_s, 0.0 if is_out else 1.0, HAND_S)

    def moving(self) -> tuple[Trajectory, ...]:
        """Return everything that takes elements in and out."""
        return tuple(holder.moves for holders in self._holders.values() for holder in holders)

    def absent(self, instant_s: float) -> Mapping[frozenset[str], float]:
        """Return sets of elements that are out, each with the part of the beam that meets just the others."""
        beams = ALL_IN
        for element, holders in self._holders.items():
            part_in = 1.0
            for holder in holders:
                part_in *= holder.part_in(instant_s)
            if part_in < 1.0:
                without = {gone | {element}: part * (1.0 - part_in) for gone, part in beams.items()}
                kept = {gone: part * part_in for gone, part in beams.items()} if part_in > 0.0 else {}
                beams = {**kept, **without}
        return beams
