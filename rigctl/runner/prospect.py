"""What a recipe lets one expect before anything is measured: powers at the detectors, and uncertainties.

Pure: a function of the recipe's nominal values, and of what the meters declare.
"""

from collections.abc import Mapping
from dataclasses import replace
from typing import TYPE_CHECKING

from rigctl.files.arrangement import train_of
from rigctl.files.labels import STEP, level_labels
from rigctl.files.recipe import Recipe
from rigctl.interfaces import Capabilities, MeterCapabilities
from rigctl.runner.forecast import Forecast
from rigctl.runner.plan import DARK_DWELLS, step_visits

if TYPE_CHECKING:
    from rigctl.optics import Row
    from rigctl.polarimetry import Prediction


def planned_rows(recipe: Recipe, *, duration_s: float) -> "list[Row]":
    """Return the visits of a recipe and its darks, evenly spread in time, as rows for a train."""
    from rigctl.optics import Row

    rows: list[Row] = []
    movable = {name for step in recipe.steps for name in step.without}
    darks = [dark for dark in recipe.darks if dark.kind != "zero"]
    for step in recipe.steps:
        present = {name: name not in step.without for name in movable}
        rows += [Row(0.0, False)] * DARK_DWELLS * sum(dark.before for dark in darks)
        for visit in step_visits(step):
            labels = level_labels(step, visit.asked)
            temperatures = {axis.role: visit.asked[axis.role] for axis in step.sweep if axis.kind == "temperature"}
            angles = {axis.role: visit.asked[axis.role] for axis in step.sweep if axis.kind == "angle"}
            rows.append(Row(0.0, True, angles, temperatures, present, labels))
        rows += [Row(0.0, False)] * DARK_DWELLS * sum(dark.after for dark in darks)
    last = max(len(rows) - 1, 1)
    return [replace(row, time_s=duration_s * place / last) for place, row in enumerate(rows)]


def expected_peaks_w(recipe: Recipe) -> Mapping[str, Mapping[str, float]]:
    """Return the largest power that the recipe's nominal values give at each detector in each step, W.

    Three standard uncertainties of the source's power are added, so that a source on the bright side does not
    overload the range.

    Returns
    -------
    By step and detector.
    """
    import numpy as np

    from rigctl.optics import readings, visits_of

    train = train_of(recipe)
    rows = planned_rows(replace(recipe, darks=()), duration_s=0.0)
    visits = visits_of(rows, train)
    levelled = train.levelled(visits)
    power_w = readings(levelled, visits, levelled.values({}))
    steps = np.array([row.labels[STEP] for row in rows])
    power = recipe.source.power
    margin = 1.5 if power is None else 1.0 + 3.0 * (power.u or 0.0) / power.value
    return {
        step.name: {role: float(column[steps == step.name].max()) * margin for role, column in power_w.items()}
        for step in recipe.steps
    }


def expected_peak_w(recipe: Recipe, role: str) -> float:
    """Return the largest power expected at a detector in any step, W."""
    return max(peaks_w[role] for peaks_w in expected_peaks_w(recipe).values())


def predicted(recipe: Recipe, capabilities: Mapping[str, Capabilities]) -> "Prediction":
    """Return how well each fitted quantity will be known, from the noise that the meters declare on their range.

    Parameters
    ----------
    capabilities
        What stands in each filled role.
    """
    import numpy as np

    from rigctl.optics import readings, visits_of
    from rigctl.polarimetry import predict

    bare = train_of(recipe)
    visits = visits_of(planned_rows(recipe, duration_s=Forecast(recipe, capabilities).duration_s()), bare)
    train = bare.levelled(visits)
    variances = {}
    for name, power_w in readings(train, visits, train.values({})).items():
        meter = capabilities[name]
        assert isinstance(meter, MeterCapabilities)
        noise_w = np.hypot(_noise_on_range_w(meter, expected_peak_w(recipe, name)), meter.relative_noise * power_w)
        variances[name] = noise_w**2 / recipe.dwell.readings
    return predict(train, visits, variances)


def _noise_on_range_w(meter: MeterCapabilities, power_w: float) -> float:
    fitting = [noise for full, noise in zip(meter.ranges_w, meter.noise_w, strict=True) if full >= power_w]
    return fitting[0] if fitting else meter.noise_w[-1]
