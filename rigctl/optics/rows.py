"""Visits one by one, put together into the columns that a train takes.

It owns what stands where a row has nothing to say: a blocked beam has no angle that matters.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np

from rigctl.optics.train import Train
from rigctl.optics.visits import Levels, Visits

SECONDS_PER_HOUR = 3600.0


@dataclass(frozen=True, slots=True)
class Row:
    """One visit or dark.

    Parameters
    ----------
    time_s
        Middle of its dwell, s.
    is_open
        Whether the source's light was let in.
    angle_deg, temperature_c
        By role.
    present
        By element, of those that move in and out.
    labels
        By level key (a role, `step`, `range of <detector>`): which level it belongs to.
    """

    time_s: float
    is_open: bool
    angle_deg: Mapping[str, float] = field(default_factory=dict)
    temperature_c: Mapping[str, float] = field(default_factory=dict)
    present: Mapping[str, bool] = field(default_factory=dict)
    labels: Mapping[str, str] = field(default_factory=dict)


def visits_of(rows: Sequence[Row], train: Train) -> Visits:
    """Return rows as the columns of a train.

    A row without an angle, a temperature or a label bears the one of the first row that has it: of a dark, none of
    them matters; of a mount that stood still in a step, it is where it stood.
    """
    mounts = {element.mount for element in train.elements if element.mount is not None}
    warm = {element.warmed_by for element in train.elements if element.warmed_by is not None}
    names = {name for row in rows for name in row.present}
    keys = {key for row in rows for key in row.labels}
    return Visits(
        angle_deg={mount: _column([row.angle_deg.get(mount) for row in rows]) for mount in sorted(mounts)},
        is_open=np.array([row.is_open for row in rows]),
        time_h=np.array([row.time_s / SECONDS_PER_HOUR for row in rows]),
        temperature_c={role: _column([row.temperature_c.get(role) for row in rows]) for role in sorted(warm)},
        present={name: np.array([row.present.get(name, True) for row in rows]) for name in sorted(names)},
        levels={key: _levels([row.labels.get(key) for row in rows]) for key in sorted(keys)},
    )


def _column(values: Sequence[float | None]) -> np.ndarray:
    filler = next((value for value in values if value is not None), 0.0)
    return np.array([filler if value is None else value for value in values])


def _levels(labels: Sequence[str | None]) -> Levels:
    known = tuple(dict.fromkeys(label for label in labels if label is not None))
    return Levels(known, np.array([0 if label is None else known.index(label) for label in labels]))
