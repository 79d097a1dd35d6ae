"""The measured data of a run as labelled arrays: one table for each step, and one for the darks.

It owns what every variable is called and how it follows from the records. It reads and writes no file, and is
used alike to build a view and to hand arrays to an analyst.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from rigctl.interfaces import Dwell
from rigctl.record.detectors import detector_variables
from rigctl.record.layout import StepLayout
from rigctl.record.names import AXIS_SUFFIXES, free_names
from rigctl.record.records import DARK_HOW, DARK_WHAT, DARK_WHEN, Visit
from rigctl.record.run import Run
from rigctl.record.variables import Array, Frame, Variable

STATUSES = ("not_measured", "ok", "retried", "saturated", "failed")
"""Meaning of the numbers in `status`, from 0."""

_VISIT_VARIABLES = ("time", "status", "visit", "attempt")
_DARK_VARIABLES = ("dark", "time", "step", "what", "when", "how")


@dataclass(frozen=True, slots=True)
class Table:
    """Variables on common dimensions; `signals` are the mean powers, the principal one first.

    `axes` span the table, slowest first; `scales` are further dimensions (the readings within a dwell).
    """

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
    visits = run.placed(step_name)
    axes = _axes(step)
    names = tuple(axis.name for axis in axes)
    places = [int(np.ravel_multi_index(visit.index, step.shape)) for visit in visits]
    frame = Frame(names, step.shape, places, run.header)
    taken = [*_VISIT_VARIABLES, *(name + suffix for name in names for suffix in AXIS_SUFFIXES)]
    detectors = detector_variables(frame, [visit.dwells for visit in visits], taken)
    return _table(axes, detectors, (*_readbacks(frame, step, visits), *_about_visits(frame, visits)))


def dark_table(run: Run) -> Table:
    """Return the darks of all steps in the order of time."""
    darks = run.darks
    numbers = np.arange(len(darks), dtype=np.int32)
    axis = Variable("dark", ("dark",), numbers, {"long_name": "number of the dark"})
    frame = Frame(("dark",), (len(darks),), range(len(darks)), run.header)
    steps = tuple(step.name for step in run.header.steps)
    own = (
        frame.times([_middle(dark.dwells, dark.began_s, dark.ended_s) for dark in darks]),
        frame.words("step", [steps.index(dark.step) for dark in darks], steps, "step it belongs to"),
        frame.words("what", [DARK_WHAT.index(d.what) for d in darks], DARK_WHAT, "which light was kept away"),
        frame.words("when", [DARK_WHEN.index(d.when) for d in darks], DARK_WHEN, "when, seen from the step"),
        frame.words("how", [DARK_HOW.index(d.how) for d in darks], DARK_HOW, "what kept the light away"),
    )
    return _table((axis,), detector_variables(frame, [dark.dwells for dark in darks], _DARK_VARIABLES), own)


def _table(axes: tuple[Variable, ...], detectors: Sequence[tuple[Variable, ...]], own: tuple[Variable, ...]) -> Table:
    measured = tuple(variable for group in detectors for variable in group[:-1])
    signals = tuple(group[0].name for group in detectors)
    return Table(axes, tuple(group[-1] for group in detectors), signals, (*measured, *own))


def _axes(step: StepLayout) -> tuple[Variable, ...]:
    names = free_names([axis.name for axis in step.axes], suffixes=AXIS_SUFFIXES, taken=_VISIT_VARIABLES)
    return tuple(
        Variable(
            name,
            (name,),
            np.array(axis.values, float),
            {"units": axis.units, "long_name": f"{axis.role}, asked for"},
        )
        for name, axis in zip(names, step.axes, strict=True)
    )


def _readbacks(frame: Frame, step: StepLayout, visits: Sequence[Visit]) -> tuple[Variable, ...]:
    return tuple(
        Variable(
            f"{name}_readback",
            frame.dims,
            frame.fill([visit.read.get(axis.role, np.nan) for visit in visits]),
            {"units": axis.units, "long_name": f"{axis.role}, read back"},
        )
        for name, axis in zip(frame.dims, step.axes, strict=True)
    )


def _about_visits(frame: Frame, visits: Sequence[Visit]) -> tuple[Variable, ...]:
    numbers = frame.fill([visit.number for visit in visits], dtype=np.int32, empty=-1)
    attempts = frame.fill([visit.attempt for visit in visits], dtype=np.int16, empty=0)
    return (
        frame.times([_middle(visit.dwells, visit.began_s, visit.ended_s) for visit in visits]),
        frame.words("status", [_status(visit) for visit in visits], STATUSES, "how the visit went"),
        Variable("visit", frame.dims, numbers, {"long_name": "number of the visit as planned, -1 where none"}),
        Variable("attempt", frame.dims, attempts, {"long_name": "attempt that is shown, 0 where none"}),
    )


def _status(visit: Visit) -> int:
    word = "retried" if visit.status == "ok" and visit.attempt > 1 else visit.status
    return STATUSES.index(word)


def _middle(dwells: Mapping[str, Dwell], began_s: float, ended_s: float) -> float:
    began_s = min((dwell.began_s for dwell in dwells.values()), default=began_s)
    ended_s = max((dwell.ended_s for dwell in dwells.values()), default=ended_s)
    return (began_s + ended_s) / 2.0
