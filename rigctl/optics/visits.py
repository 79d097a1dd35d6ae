"""The visits of a sweep as columns: where each mount stood, what was in the beam, how warm it was, and when.

It owns the shape of the table; it never holds what was measured there.
"""

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import numpy.typing as npt

from rigctl.errors import PlanError
from rigctl.optics.kernel import Array, Flags, Indices


@dataclass(frozen=True, slots=True, eq=False)
class Levels:
    """To which of several levels each visit belongs.

    Parameters
    ----------
    labels
        What the levels are called, such as `22 degC`; no two alike.
    index
        Place of each visit's level in `labels`, shape (n,).

    Raises
    ------
    PlanError
        When two labels are alike, or an index points at none.
    """

    labels: tuple[str, ...]
    index: Indices

    def __post_init__(self) -> None:
        object.__setattr__(self, "index", np.asarray(self.index, dtype=np.intp))
        if len(set(self.labels)) != len(self.labels):
            raise PlanError(f"two levels are called alike: {', '.join(self.labels)}", do="Name each level once.")
        if self.index.size and not 0 <= np.min(self.index) <= np.max(self.index) < len(self.labels):
            raise PlanError("a visit belongs to a level that is not listed", do="List every level.")

    def rows(self, keep: Flags | Indices) -> "Levels":
        """Only the visits chosen by `keep`."""
        return Levels(self.labels, self.index[keep])

    @classmethod
    def join(cls, parts: Sequence["Levels"]) -> "Levels":
        """One after another; labels in the order in which they come up."""
        labels = tuple(dict.fromkeys(label for part in parts for label in part.labels))
        return cls(labels, np.array([labels.index(part.labels[i]) for part in parts for i in part.index]))


def groups(columns: Sequence[npt.NDArray[Any]], count: int) -> Indices:
    """Number of the group of each of `count` visits: within one, no column changes."""
    if not columns:
        return np.zeros(count, dtype=np.intp)
    _, group = np.unique(np.stack(columns, axis=-1), axis=0, return_inverse=True)
    return np.reshape(group, count)


@dataclass(frozen=True, slots=True, eq=False)
class Visits:
    """Settings of n visits, in any order.

    Parameters
    ----------
    angle_deg
        By the mount's role: dial angle, shape (n,), deg.
    is_open
        Whether the beam was open, shape (n,); closed means blocked at the source. Whatever else is told of a
        visit with a blocked beam does not matter, but must be a number.
    time_h
        Middle of each dwell, shape (n,), h from any common zero.
    temperature_c
        By role: temperature, shape (n,), degC.
    present
        By the element's name: whether it was in the beam, shape (n,); elements that are not named always were.
    power
        Power of the source relative to `source.power`, shape (n,), as a monitor tells it; the drift is then
        about what remains. None: steady but for the drift.
    levels
        By a role, `step` or `range of <detector>`: the levels of the quantities that have one value each.

    Raises
    ------
    PlanError
        When the columns differ in length.
    """

    angle_deg: Mapping[str, Array]
    is_open: Flags
    time_h: Array
    temperature_c: Mapping[str, Array] = field(default_factory=dict)
    present: Mapping[str, Flags] = field(default_factory=dict)
    power: Array | None = None
    levels: Mapping[str, Levels] = field(default_factory=dict)

    def __post_init__(self) -> None:
        object.__setattr__(self, "is_open", np.asarray(self.is_open, dtype=bool))  # 0 and 1 will do as well
        present = {name: np.asarray(column, dtype=bool) for name, column in self.present.items()}
        object.__setattr__(self, "present", present)
        if {np.shape(column) for column in self._columns()} != {(self.count,)}:
            raise PlanError("the columns of the visits differ in length", do="Give one value per visit.")

    def _columns(self) -> Iterator[Array | Flags | Indices]:
        yield self.is_open
        for columns in (self.angle_deg, self.temperature_c, self.present):
            yield from columns.values()
        yield from () if self.power is None else (self.power,)
        yield from (levels.index for levels in self.levels.values())

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

    def levels_for(self, key: str, name: str) -> Levels:
        """The levels of one key, wanted for the quantity `name`.

        Raises
        ------
        PlanError
            When the visits do not tell them.
        """
        if key not in self.levels:
            raise PlanError(f"'{name}' has a value for each '{key}', which the visits do not tell", where=name)
        return self.levels[key]

    def rows(self, keep: Flags | Indices) -> "Visits":
        """Only the visits marked in `keep`, shape (n,), or those at the places it lists, in its order."""
        return Visits(
            {mount: column[keep] for mount, column in self.angle_deg.items()},
            self.is_open[keep],
            self.time_h[keep],
            temperature_c={role: column[keep] for role, column in self.temperature_c.items()},
            present={name: column[keep] for name, column in self.present.items()},
            power=None if self.power is None else self.power[keep],
            levels={key: levels.rows(keep) for key, levels in self.levels.items()},
        )

    @classmethod
    def join(cls, *parts: "Visits") -> "Visits":
        """The visits of several tables, one after another.

        Raises
        ------
        PlanError
            When the tables do not tell the same mounts, temperatures and levels.
        """
        if len({(frozenset(p.angle_deg), frozenset(p.temperature_c), frozenset(p.levels)) for p in parts}) != 1:
            raise PlanError(
                "only visits that list the same mounts, temperatures and levels can be joined",
                do="List all of them in each part.",
            )
        first = parts[0]
        names = dict.fromkeys(name for part in parts for name in part.present)
        has_power = any(part.power is not None for part in parts)
        return cls(
            {mount: np.concatenate([p.angle_deg[mount] for p in parts]) for mount in first.angle_deg},
            np.concatenate([p.is_open for p in parts]),
            np.concatenate([p.time_h for p in parts]),
            temperature_c={
                role: np.concatenate([p.temperature_c[role] for p in parts]) for role in first.temperature_c
            },
            present={
                name: np.concatenate([p.present.get(name, np.ones(p.count, bool)) for p in parts]) for name in names
            },
            power=np.concatenate([np.ones(p.count) if p.power is None else p.power for p in parts])
            if has_power
            else None,
            levels={key: Levels.join([p.levels[key] for p in parts]) for key in first.levels},
        )
