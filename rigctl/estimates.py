"""From a run to estimates: the readings of every step and dark, put before the fit of the recipe's train.

It owns which records count: the last good attempt at each confirmed visit, and every dark and background; and how a
monitor's readings take the source's wander out of the signal's. It fits nothing itself.
"""

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from math import prod
from typing import TYPE_CHECKING

from rigctl.errors import UndecidedError
from rigctl.files import parse_recipe
from rigctl.files.arrangement import train_of
from rigctl.files.labels import level_labels, range_labels
from rigctl.files.recipe import Recipe
from rigctl.interfaces import Dwell
from rigctl.record.records import Dark, Visit
from rigctl.record.run import Run

if TYPE_CHECKING:
    from rigctl.optics import Row, Train, Visits
    from rigctl.optics.kernel import Array
    from rigctl.polarimetry import Fit, Observed


@dataclass(frozen=True, slots=True)
class Data:
    """What a run has to say about its train: the visits (darks among them) and what each detector read."""

    train: "Train"
    visits: "Visits"
    observed: "Mapping[str, Observed]"
    saturated: int
    missing: int
    unconfirmed: int


def run_data(run: Run) -> Data:
    """Gather what a run measured.

    Raises
    ------
    UndecidedError
        When no visit was completed.
    """
    from rigctl.optics import visits_of

    recipe = parse_recipe(run.header.recipe.text, run.header.recipe.file_name)
    train = train_of(recipe)
    visits = [visit for step in run.header.steps for visit in run.visits(step.name)]
    good = [visit for visit in visits if visit.is_confirmed]
    if not good:
        raise UndecidedError("no visit was completed", where=run.header.title, do="Run the recipe again.")
    darks = [dark for dark in run.darks if dark.what != "zero"]
    rows = [*(_visit_row(visit, recipe) for visit in good), *map(_dark_row, darks)]
    dwells = [*(visit.dwells for visit in good), *(dark.dwells for dark in darks)]
    monitor = run.header.monitor
    detectors = [d.name for d in train.detectors if d.name in run.header.detectors and d.name != monitor]
    placed = [visit for step in run.header.steps for visit in run.placed(step.name)]
    saturated = sum(visit.status == "saturated" for visit in placed)
    planned = sum(prod(step.shape) for step in run.header.steps)
    return Data(
        train=train.read_by(detectors),
        visits=visits_of(rows, train),
        observed={name: _observed(dwells, len(good), name, monitor) for name in detectors},
        saturated=saturated,
        missing=planned - len(visits) - saturated,
        unconfirmed=len(visits) - len(good),
    )


def asks_for_anything(run: Run) -> bool:
    """Whether a run's recipe calls anything unknown."""
    recipe = parse_recipe(run.header.recipe.text, run.header.recipe.file_name)
    return any(part.unknown for part in recipe.optics)


def truth_of(run: Run) -> Mapping[str, float]:
    """Return the hidden truth of a rehearsal as the fit means it; empty on hardware.

    The simulated source is given by its power at the start, the fit's by that in the middle of the visits; with a
    monitor, both are about what the monitor does not tell, and have no truth of their own.
    """
    from rigctl.optics.parts import DRIFT, POWER

    truth = dict(run.header.truth)
    if run.header.monitor:
        return {name: value for name, value in truth.items() if name not in (POWER, DRIFT)}
    if POWER in truth and DRIFT in truth:
        times_h = run_data(run).visits.time_h
        truth[POWER] *= 1.0 + truth[DRIFT] * float(times_h.min() + times_h.max()) / 2.0
    return truth


def fit_run(run: Run) -> "Fit":
    """Fit the train of a run's recipe to everything that the run measured, and note what it could not use."""
    from rigctl.polarimetry import fit

    data = run_data(run)
    fitted = fit(data.train, data.visits, data.observed)
    return replace(fitted, notes=(*fitted.notes, *_left_out(data)))


def _left_out(data: Data) -> Iterator[str]:
    if data.saturated:
        yield f"visits left out because a detector was overloaded: {data.saturated}"
    if data.missing:
        yield f"planned visits that were not measured: {data.missing}"
    if data.unconfirmed:
        yield f"visits left out because nobody confirmed what stood in the beam: {data.unconfirmed}"


def _visit_row(visit: Visit, recipe: Recipe) -> "Row":
    from rigctl.optics import Row

    step = next(step for step in recipe.steps if step.name == visit.step)
    kinds = {axis.role: axis.kind for axis in step.sweep}
    ranges = {role: dwell.range_w for role, dwell in visit.dwells.items()}
    temperatures = {
        role: values["temperature_c"] for role, values in visit.conditions.items() if "temperature_c" in values
    }
    return Row(
        time_s=_middle_s(visit.dwells),
        is_open=True,
        angle_deg={role: value for role, value in visit.read.items() if kinds.get(role) == "angle"},
        temperature_c=temperatures,
        present=visit.present,
        labels={**level_labels(step, visit.asked), **range_labels(ranges)},
    )


def _dark_row(dark: Dark) -> "Row":
    from rigctl.optics import Row

    ranges = {role: dwell.range_w for role, dwell in dark.dwells.items()}
    return Row(_middle_s(dark.dwells), False, labels=range_labels(ranges))


def _middle_s(dwells: Mapping[str, Dwell]) -> float:
    middles = [(dwell.began_s + dwell.ended_s) / 2 for dwell in dwells.values()]
    return sum(middles) / len(middles)


def _observed(dwells: Sequence[Mapping[str, Dwell]], lit: int, name: str, monitor: str) -> "Observed":
    """Mean, sample standard deviation and number of each dwell's readings; flagged readings left out.

    With a monitor, each reading of a lit dwell is divided by what the monitor read in the same moment, over its mean
    in the run: what both have in common is the source's.

    Parameters
    ----------
    lit
        The first so many dwells are visits, the others darks.
    """
    import numpy as np

    from rigctl.polarimetry import Observed

    readings = [np.array(dwell[name].levels_w) for dwell in dwells]
    if monitor:
        readings = _without_wander(readings, [np.array(dwell[monitor].levels_w) for dwell in dwells], lit)
    readings = [values[np.isfinite(values)] for values in readings]
    return Observed(
        power_w=np.array([np.mean(values) if values.size else np.nan for values in readings]),
        sd_w=np.array([np.std(values, ddof=1) if values.size > 1 else np.nan for values in readings]),
        n=np.array([values.size for values in readings]),
    )


def _without_wander(signal: "list[Array]", monitor: "list[Array]", lit: int) -> "list[Array]":
    """Divide the light of each lit dwell by the monitor's, over its mean; the darks of both are taken off first."""
    import numpy as np

    dark_s = np.nanmean(np.concatenate(signal[lit:])) if signal[lit:] else 0.0
    dark_m = np.nanmean(np.concatenate(monitor[lit:])) if monitor[lit:] else 0.0
    mean = np.nanmean(np.concatenate(monitor[:lit])) - dark_m
    divided = [
        dark_s + (s - dark_s) * mean / ((m if m.size == s.size else np.nanmean(m)) - dark_m)
        for s, m in zip(signal[:lit], monitor[:lit], strict=True)
    ]
    return [*divided, *signal[lit:]]
