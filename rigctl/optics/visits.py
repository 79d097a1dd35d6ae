"""The visits of a sweep as columns: where each mount stood, whether the beam was open, and when.

It owns the shape of the table; it never holds what was measured there.
"""

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from rigctl.errors import PlanError
from rigctl.optics.kernel import Array, Flags


@dataclass(frozen=True, slots=True, eq=False)
class Visits:
    """Settings of n visits, in any order.

    Parameters
    ----------
    angle_deg
        By the mount's role: dial angle, shape (n,), deg.
    is_open
        Whether the beam was open, shape (n,); closed means blocked at the source.
    time_h
        Middle of each dwell, shape (n,), h from any common zero.

    Raises
    ------
    PlanError
        When the columns differ in length.
    """

    angle_deg: Mapping[str, Array]
    is_open: Flags
    time_h: Array

    def __post_init__(self) -> None:
        object.__setattr__(self, "is_open", np.asarray(self.is_open, dtype=bool))  # 0 and 1 will do as well
        if {np.shape(column) for column in self.angle_deg.values()} | {np.shape(self.is_open)} != {(self.count,)}:
            raise PlanError("the columns of the visits differ in length", do="Give one value per visit.")

    @property
    def count(self) -> int:
        """Number of visits."""
        return int(np.size(self.time_h))

    @property
    def centred_h(self) -> Array:
        """Time from the middle between the first and the last visit, shape (n,), h."""
        return self.time_h - (np.min(self.time_h) + np.max(self.time_h)) / 2 if self.count else self.time_h

    @property
    def has_dark(self) -> bool:
        """Whether the beam was blocked at some visit."""
        return not bool(np.all(self.is_open))

    def rows(self, keep: Flags) -> "Visits":
        """Only the visits marked in `keep`, shape (n,)."""
        angle_deg = {mount: column[keep] for mount, column in self.angle_deg.items()}
        return Visits(angle_deg, self.is_open[keep], self.time_h[keep])

    @classmethod
    def join(cls, *parts: "Visits") -> "Visits":
        """The visits of several tables, one after another.

        Raises
        ------
        PlanError
            When the tables do not turn the same mounts.
        """
        mounts = {frozenset(part.angle_deg) for part in parts}
        if len(mounts) != 1:
            raise PlanError("only visits that list the same mounts can be joined", do="List every mount in each part.")
        return cls(
            {mount: np.concatenate([p.angle_deg[mount] for p in parts]) for mount in parts[0].angle_deg},
            np.concatenate([p.is_open for p in parts]),
            np.concatenate([p.time_h for p in parts]),
        )
