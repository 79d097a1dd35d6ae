"""The measured data of a run as labelled arrays: one table for each step, and one for the darks.

It owns what every variable is called and how it follows from the records. It reads and writes no file, and is
used alike to build a view and to hand arrays to an analyst.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import numpy.typing as npt

from rigctl.interfaces import Dwell, Flag
from rigctl.record.layout import Header, StepLayout
from rigctl.record.names import AXIS_SUFFIXES, DETECTOR_SUFFIXES, free_names
from rigctl.record.records import DARK_HOW, DARK_WHEN, Visit
from rigctl.record.run import Run

Array = npt.NDArray[Any]

STATUSES = ("not_measured", "ok", "retried", "saturated", "failed")
"""Meaning of the numbers in `status`, from 0."""

_CENSORED = Flag.OVERLOAD | Flag.UNDERRANGE


@dataclass(frozen=True, slots=True)
class Variable:
    """An array with the names of its dimensions and its attributes (units, meaning)."""

    name: str
    dims: tuple[str, ...]
    values: Array
    attributes: Mapping[str, Any] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class Table:
    """Variables on common dimensions; `signals` are the mean powers, the principal one first.

    `axes` span the table, slowest first; `scales` are further dimensions (the readings within a dwell).
    """

    title: str
    axes: tuple[Variable, ...]
    scales: tuple[Variable, ...]
    signals: tuple[str, ...]
    variables: tuple[Variable, ...]

    def __getitem__(self, name: str) -> Array:
        """Return the values of an axis or variable."""
        return next(v.values for v in (*self.axes, *self.scales, *self.variables) if v.name == name)


def step_table(run: Run, step_name: str) -> Table:
    """Return the grid of a step; what was not measured is NaN, with status 0."""
    step = run.header.step(step_name)
    fixed = ("time", "status", "visit", "attempt")
    axis_names = free_names([axis.name for axis in step.axes], suffixes=AXIS_SUFFIXES, taken=fixed)
    taken = [*fixed, *(name + suffix for name in axis_names for suffix in AXIS_SUFFIXES)]
    axes = tuple(
        Variable(
            name,
            (name,),
            np.array(axis.values, float),
            {"units": axis.units, "long_name": f"{axis.role}, asked for"},
        )
        for name, axis in zip(axis_names, step.axes, strict=True)
    )
    visits = run.placed(step_name)
    places = [int(np.ravel_multi_index(visit.index, step.shape)) for visit in visits]
    frame = _Frame(axis_names, step.shape, run.header)
    detectors = _detectors(frame, [visit.dwells for visit in visits], places, taken)
    own = (*_readbacks(frame, step, visits, places), *_about_visits(frame, visits, places))
    return _table(step_name, axes, detectors, own)


def dark_table(run: Run) -> Table:
    """Return the darks of all steps in the order of time."""
    darks = run.darks
    fixed = ("dark", "time", "step", "when", "how")
    places = list(range(len(darks)))
    frame = _Frame(("dark",), (len(darks),), run.header)
    axis = Variable(
        "dark", ("dark",), np.arange(len(darks), dtype=np.int32), {"long_name": "number of the dark"}
    )
    steps = tuple(step.name for step in run.header.steps)
    own = (
        _time(frame, [_middle(d.dwells, d.began_s, d.ended_s) for d in darks], places),
        _words(frame, "step", [d.step for d in darks], steps),
        _words(frame, "when", [d.when for d in darks], DARK_WHEN),
        _words(frame, "how", [d.how for d in darks], DARK_HOW),
    )
    return _table(
        "readings with the beam blocked",
        (axis,),
        _detectors(frame, [d.dwells for d in darks], places, fixed),
        own,
    )


@dataclass(frozen=True, slots=True)
class _Frame:
    """Dimensions and shape that the variables of a table have in common."""

    dims: tuple[str, ...]
    shape: tuple[int, ...]
    header: Header

    def fill(
        self, places: Sequence[int], values: Sequence[float], *, dtype: Any = float, empty: float = np.nan
    ) -> Array:
        """Return an array that has values at flat places and `empty` elsewhere."""
        flat = np.full(int(np.prod(self.shape)), empty, dtype)
        flat[list(places)] = values
        return flat.reshape(self.shape)


def _table(
    title: str, axes: tuple[Variable, ...], detectors: Sequence[Sequence[Variable]], own: tuple[Variable, ...]
) -> Table:
    measured = tuple(variable for group in detectors for variable in group[:-1])
    return Table(
        title, axes, tuple(g[-1] for g in detectors), tuple(g[0].name for g in detectors), (*measured, *own)
    )


def _readbacks(
    frame: _Frame, step: StepLayout, visits: Sequence[Visit], places: Sequence[int]
) -> tuple[Variable, ...]:
    return tuple(
        Variable(
            f"{name}_readback",
            frame.dims,
            frame.fill(places, [visit.read.get(axis.role, np.nan) for visit in visits]),
            {"units": axis.units, "long_name": f"{axis.role}, read back"},
        )
        for name, axis in zip(frame.dims, step.axes, strict=True)
    )


def _about_visits(frame: _Frame, visits: Sequence[Visit], places: Sequence[int]) -> tuple[Variable, ...]:
    numbers = frame.fill(places, [v.number for v in visits], dtype=np.int32, empty=-1)
    attempts = frame.fill(places, [v.attempt for v in visits], dtype=np.int16, empty=0)
    return (
        _time(frame, [_middle(v.dwells, v.began_s, v.ended_s) for v in visits], places),
        Variable(
            "status",
            frame.dims,
            frame.fill(places, [_status(v) for v in visits], dtype=np.int8, empty=0),
            _flag_words(STATUSES) | {"long_name": "how the visit went"},
        ),
        Variable(
            "visit", frame.dims, numbers, {"long_name": "number of the visit in planned order, -1 where none"}
        ),
        Variable("attempt", frame.dims, attempts, {"long_name": "attempt that is shown, 0 where none"}),
    )


def _status(visit: Visit) -> int:
    word = "retried" if visit.status == "ok" and visit.attempt > 1 else visit.status
    return STATUSES.index(word)


def _middle(dwells: Mapping[str, Dwell], began_s: float, ended_s: float) -> float:
    began_s = min((dwell.began_s for dwell in dwells.values()), default=began_s)
    ended_s = max((dwell.ended_s for dwell in dwells.values()), default=ended_s)
    return (began_s + ended_s) / 2.0


def _time(frame: _Frame, times_s: Sequence[float], places: Sequence[int]) -> Variable:
    units = f"seconds since {frame.header.start.isoformat()}"
    return Variable(
        "time", frame.dims, frame.fill(places, times_s), {"units": units, "long_name": "middle of the dwell"}
    )


def _words(frame: _Frame, name: str, said: Sequence[str], words: Sequence[str]) -> Variable:
    values = np.array([words.index(word) for word in said], np.int16)
    return Variable(name, frame.dims, values, _flag_words(words, dtype=np.int16))


def _flag_words(words: Sequence[str], *, dtype: Any = np.int8) -> dict[str, Any]:
    meanings = " ".join(free_names(words))
    return {"flag_values": np.arange(len(words), dtype=dtype), "flag_meanings": meanings}


def _detectors(
    frame: _Frame, dwells: Sequence[Mapping[str, Dwell]], places: Sequence[int], taken: Sequence[str]
) -> list[tuple[Variable, ...]]:
    names = free_names(frame.header.detectors, suffixes=DETECTOR_SUFFIXES, taken=taken)
    return [
        _detector(frame, name, [(p, d[role]) for p, d in zip(places, dwells, strict=True) if role in d], role)
        for name, role in zip(names, frame.header.detectors, strict=True)
    ]


def _detector(
    frame: _Frame, name: str, placed: Sequence[tuple[int, Dwell]], role: str
) -> tuple[Variable, ...]:
    """Return the variables of one detector, the mean first and the dimension of the readings last."""
    places = [place for place, _ in placed]
    levels = _levels(frame, placed)
    flags = frame.fill(places, [int(dwell.flags) for _, dwell in placed], dtype=np.int16, empty=0)
    ranges = frame.fill(places, [dwell.range_w for _, dwell in placed])
    mean, sd, n = _moments(levels, flags)
    error = sd / np.sqrt(np.maximum(n, 1))
    watts, dims, reading = {"units": "W"}, frame.dims, f"{name}_reading"
    return (
        Variable(name, dims, mean, watts | {"long_name": f"{role}, mean power"}),
        Variable(
            f"{name}_errors", dims, error, watts | {"long_name": f"{role}, standard uncertainty of the mean"}
        ),
        Variable(
            f"{name}_sd",
            dims,
            sd,
            watts | {"long_name": f"{role}, sample standard deviation of the readings"},
        ),
        Variable(f"{name}_n", dims, n, {"long_name": f"{role}, number of readings"}),
        Variable(f"{name}_range", dims, ranges, watts | {"long_name": f"{role}, full scale of the range"}),
        Variable(
            f"{name}_flags",
            dims,
            flags,
            _flag_masks() | {"long_name": f"{role}, what is wrong with the readings"},
        ),
        Variable(f"{name}_levels", (*dims, reading), levels, watts | {"long_name": f"{role}, every reading"}),
        Variable(
            reading,
            (reading,),
            np.arange(levels.shape[-1], dtype=np.int32),
            {"long_name": "number of the reading"},
        ),
    )


def _flag_masks() -> dict[str, Any]:
    masks = np.array([flag.value for flag in Flag], np.int16)
    return {"flag_masks": masks, "flag_meanings": " ".join(str(flag.name).lower() for flag in Flag)}


def _levels(frame: _Frame, placed: Sequence[tuple[int, Dwell]]) -> Array:
    width = max([1, *(len(dwell.levels_w) for _, dwell in placed)])
    levels = np.full((int(np.prod(frame.shape)), width), np.nan)
    for place, dwell in placed:
        levels[place, : len(dwell.levels_w)] = dwell.levels_w
    return levels.reshape(*frame.shape, width)


def _moments(levels: Array, flags: Array) -> tuple[Array, Array, Array]:
    """Mean, sample standard deviation and number of the readings of each dwell.

    A dwell that lost readings beyond the ends of the range has no mean: the ones that are left would bias it.
    """
    is_reading = np.isfinite(levels)
    n = is_reading.sum(axis=-1, dtype=np.int32)
    with np.errstate(invalid="ignore", divide="ignore"):
        mean = np.where(is_reading, levels, 0.0).sum(axis=-1) / n
        deviation = np.where(is_reading, levels - mean[..., None], 0.0)
        sd = np.sqrt((deviation**2).sum(axis=-1) / np.where(n > 1, n - 1, np.nan))
    mean[(flags & int(_CENSORED)) != 0] = np.nan
    sd[np.isnan(mean)] = np.nan
    return mean, sd, n
