"""From a run to estimates: the readings of every step and dark, put before the fit of the recipe's train.

It owns which records count: the last good attempt at each visit, and every dark. It computes nothing itself.
"""

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

from rigctl.errors import UndecidedError
from rigctl.files import parse_recipe
from rigctl.files.arrangement import train_of
from rigctl.interfaces import Dwell
from rigctl.record.run import Run

if TYPE_CHECKING:
    from rigctl.optics import Train, Visits
    from rigctl.polarimetry import Fit, Observed

SECONDS_PER_HOUR = 3600.0


@dataclass(frozen=True, slots=True)
class Data:
    """What a run has to say about its train: the visits (darks among them) and what each detector read."""

    train: "Train"
    visits: "Visits"
    observed: "Mapping[str, Observed]"
    saturated: int
    missing: int


@dataclass(frozen=True, slots=True)
class _Row:
    """One visit or dark: angles read, deg; whether the beam was let in; middle of the dwell, s."""

    angle_deg: Mapping[str, float]
    is_open: bool
    middle_s: float
    dwells: Mapping[str, Dwell]


def run_data(run: Run) -> Data:
    """Gather what a run measured.

    Raises
    ------
    UndecidedError
        When no visit was completed.
    """
    recipe = parse_recipe(run.header.recipe.text, run.header.recipe.file_name)
    train = train_of(recipe)
    rows = [*_visit_rows(run), *_dark_rows(run)]
    if not any(row.is_open for row in rows):
        raise UndecidedError("no visit was completed", where=run.header.title, do="Run the recipe again.")
    placed = [visit for step in run.header.steps for visit in run.placed(step.name)]
    planned = sum(_size(step.shape) for step in run.header.steps)
    good = sum(visit.status == "ok" for visit in placed)
    saturated = sum(visit.status == "saturated" for visit in placed)
    detectors = [name for name in run.header.detectors if name in {d.name for d in train.detectors}]
    return Data(
        train=train,
        visits=_visits(rows, train),
        observed={name: _observed([row.dwells[name] for row in rows]) for name in detectors},
        saturated=saturated,
        missing=planned - good - saturated,
    )


def truth_of(run: Run) -> Mapping[str, float]:
    """Return the hidden truth of a rehearsal as the fit means it; empty on hardware.

    The simulated source is given by its power at the start, the fit's by that in the middle of the visits.
    """
    from rigctl.optics.train import DRIFT, POWER

    truth = dict(run.header.truth)
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


def _size(shape: Sequence[int]) -> int:
    total = 1
    for length in shape:
        total *= length
    return total


def _visit_rows(run: Run) -> list[_Row]:
    visits = [visit for step in run.header.steps for visit in run.visits(step.name)]
    return [_Row(visit.read, True, _middle_s(visit.dwells), visit.dwells) for visit in visits]


def _dark_rows(run: Run) -> list[_Row]:
    return [_Row({}, False, _middle_s(dark.dwells), dark.dwells) for dark in run.darks]


def _middle_s(dwells: Mapping[str, Dwell]) -> float:
    middles = [(dwell.began_s + dwell.ended_s) / 2 for dwell in dwells.values()]
    return sum(middles) / len(middles)


def _visits(rows: Sequence[_Row], train: "Train") -> "Visits":
    """Rows as arrays; a mount's angle does not matter while the beam is blocked, so a dark bears zero."""
    import numpy as np

    from rigctl.optics import Visits

    mounts = {element.mount for element in train.elements if element.mount is not None}
    return Visits(
        angle_deg={mount: np.array([row.angle_deg.get(mount, 0.0) for row in rows]) for mount in sorted(mounts)},
        is_open=np.array([row.is_open for row in rows]),
        time_h=np.array([row.middle_s / SECONDS_PER_HOUR for row in rows]),
    )


def _observed(dwells: Sequence[Dwell]) -> "Observed":
    """Mean, sample standard deviation and number of the readings of each dwell; flagged readings left out."""
    import numpy as np

    from rigctl.polarimetry import Observed

    levels = [np.array([level for level in dwell.levels_w if level == level]) for dwell in dwells]
    return Observed(
        power_w=np.array([np.mean(values) if values.size else np.nan for values in levels]),
        sd_w=np.array([np.std(values, ddof=1) if values.size > 1 else np.nan for values in levels]),
        n=np.array([values.size for values in levels]),
    )
