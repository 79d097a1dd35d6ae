"""The measured data of a run as labelled arrays: one table for each step, and one for the darks.

It owns what every variable is called and how it follows from the records. It reads and writes no file, and is
used alike to build a view and to hand arrays to an analyst.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from rigctl.interfaces import Dwell
from rigctl.record.conditions import condition_variables
from rigctl.record.correction import corrections
from rigctl.record.detectors import Detected, detected
from rigctl.record.layout import AxisLayout, StepLayout
from rigctl.record.names import AXIS_SUFFIXES, DETECTOR_SUFFIXES, clean_name, free_names
from rigctl.record.records import DARK_HOW, DARK_WHAT, DARK_WHEN, Visit
from rigctl.record.run import Run
from rigctl.record.variables import Array, Frame, Variable

STATUSES = ("not_measured", "ok", "retried", "saturated", "failed")
"""Meaning of the numbers in `status`, from 0."""

_VISIT_VARIABLES = ("time", "status", "visit", "attempt", "confirmed")
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
    found = detected(frame, [visit.dwells for visit in visits], taken)
    taken += [one.name + suffix for one in found for suffix in DETECTOR_SUFFIXES]
    conditions = condition_variables(frame, step, visits, taken)
    taken += [variable.name for variable in conditions]
    own = (*_read(frame, step, visits), *conditions, *_about_visits(frame, visits), *_present(frame, visits, taken))
    return _table(axes, found, (*corrections(run, found), *own))


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
    return _table((axis,), detected(frame, [dark.dwells for dark in darks], _DARK_VARIABLES), own)


def _table(axes: tuple[Variable, ...], found: Sequence[Detected], own: tuple[Variable, ...]) -> Table:
    measured = tuple(variable for one in found for variable in one.variables)
    return Table(axes, tuple(one.reading for one in found), tuple(one.name for one in found), (*measured, *own))


def _axes(step: StepLayout) -> tuple[Variable, ...]:
    names = free_names([axis.name for axis in step.axes], suffixes=AXIS_SUFFIXES, taken=_VISIT_VARIABLES)
    return tuple(_axis(name, axis) for name, axis in zip(names, step.axes, strict=True))


def _axis(name: str, axis: AxisLayout) -> Variable:
    meaning = "number of the repeat" if axis.is_repeat else f"{axis.role}, asked for"
    return Variable(name, (name,), np.array(axis.values, float), {"units": axis.units, "long_name": meaning})


def _read(frame: Frame, step: StepLayout, visits: Sequence[Visit]) -> tuple[Variable, ...]:
    """Return what each axis read back."""
    return tuple(
        Variable(
            f"{name}_read",
            frame.dims,
            frame.fill([visit.read.get(axis.role, np.nan) for visit in visits]),
            {"units": axis.units, "long_name": f"{axis.role}, read back"},
        )
        for name, axis in zip(frame.dims, step.axes, strict=True)
        if not axis.is_repeat
    )


def _present(frame: Frame, visits: Sequence[Visit], taken: Sequence[str]) -> tuple[Variable, ...]:
    """Return for each element that moves whether it stood in the beam."""
    elements = list(dict.fromkeys(element for visit in visits for element in visit.present))
    names = free_names([clean_name(f"{element} present") for element in elements], taken=taken)
    return tuple(
        frame.truths(name, [visit.present.get(element) for visit in visits], f"whether {element} stood in the beam")
        for name, element in zip(names, elements, strict=True)
    )


def _about_visits(frame: Frame, visits: Sequence[Visit]) -> tuple[Variable, ...]:
    numbers = frame.fill([visit.number for visit in visits], dtype=np.int32, empty=-1)
    attempts = frame.fill([visit.attempt for visit in visits], dtype=np.int16, empty=0)
    return (
        frame.times([_middle(visit.dwells, visit.began_s, visit.ended_s) for visit in visits]),
        frame.words("status", [_status(visit) for visit in visits], STATUSES, "how the visit went"),
        Variable("visit", frame.dims, numbers, {"long_name": "number of the visit as planned, -1 where none"}),
        Variable("attempt", frame.dims, attempts, {"long_name": "attempt that is shown, 0 where none"}),
        frame.truths("confirmed", [_confirmed(visit) for visit in visits], "whether the elements stood as asked"),
    )


def _confirmed(visit: Visit) -> bool | None:
    return visit.is_confirmed if visit.dwells else None


def _status(visit: Visit) -> int:
    word = "retried" if visit.status == "ok" and visit.attempt > 1 else visit.status
    return STATUSES.index(word)


def _middle(dwells: Mapping[str, Dwell], began_s: float, ended_s: float) -> float:
    began_s = min((dwell.began_s for dwell in dwells.values()), default=began_s)
    ended_s = max((dwell.ended_s for dwell in dwells.values()), default=ended_s)
    return (began_s + ended_s) / 2.0
