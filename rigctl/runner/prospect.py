"""What a recipe lets one expect before anything is measured: powers at the detectors, and uncertainties.

Pure: a function of the recipe's nominal values, and of what the meters declare.
"""

from collections.abc import Mapping
from typing import TYPE_CHECKING

from rigctl.files.arrangement import train_of
from rigctl.files.recipe import Recipe
from rigctl.interfaces import Capabilities, MeterCapabilities
from rigctl.runner.plan import DARK_DWELLS, duration_s, step_visits

if TYPE_CHECKING:
    from rigctl.optics import Train, Visits
    from rigctl.polarimetry import Prediction

SECONDS_PER_HOUR = 3600.0
DARK: Mapping[str, float] = {}
"""A dwell with the beam blocked, where no angle matters."""


def planned_visits(recipe: Recipe, train: "Train", *, duration_s: float) -> "Visits":
    """Return the visits of a recipe as the train takes them, its darks among them, evenly spread in time."""
    import numpy as np

    from rigctl.optics import Visits

    has_before, has_after = (False, False) if recipe.dark is None else (recipe.dark.before, recipe.dark.after)
    rows: list[Mapping[str, float]] = []
    for step in recipe.steps:
        rows += [DARK] * DARK_DWELLS * has_before
        rows += [visit.asked_deg for visit in step_visits(step)]
        rows += [DARK] * DARK_DWELLS * has_after
    mounts = sorted({element.mount for element in train.elements if element.mount is not None})
    return Visits(
        angle_deg={mount: np.array([row.get(mount, 0.0) for row in rows]) for mount in mounts},
        is_open=np.array([row is not DARK for row in rows]),
        time_h=np.linspace(0.0, duration_s / SECONDS_PER_HOUR, len(rows)),
    )


def expected_peak_w(recipe: Recipe, role: str) -> float:
    """Return the largest power that the recipe's nominal values give at a detector in any visit, W.

    Three standard uncertainties of the source's power are added, so that a source on the bright side does not
    overload the range.
    """
    from rigctl.optics import readings

    train = train_of(recipe)
    nominal = {name: quantity.value for name, quantity in train.quantities.items()}
    peak_w = float(readings(train, planned_visits(recipe, train, duration_s=0.0), nominal)[role].max())
    power = recipe.source.power
    margin = 1.5 if power is None else 1.0 + 3.0 * (power.u or 0.0) / power.value
    return peak_w * margin


def predicted(recipe: Recipe, capabilities: Mapping[str, Capabilities]) -> "Prediction":
    """Return how well each fitted quantity will be known, from the noise that the meters declare on their range.

    Parameters
    ----------
    capabilities
        What stands in each filled role.
    """
    import numpy as np

    from rigctl.optics import readings
    from rigctl.polarimetry import predict

    train = train_of(recipe)
    visits = planned_visits(recipe, train, duration_s=duration_s(recipe, capabilities))
    nominal = {name: quantity.value for name, quantity in train.quantities.items()}
    variances = {}
    for name, power_w in readings(train, visits, nominal).items():
        meter = capabilities[name]
        assert isinstance(meter, MeterCapabilities)
        noise_w = np.hypot(_noise_on_range_w(meter, expected_peak_w(recipe, name)), meter.relative_noise * power_w)
        variances[name] = noise_w**2 / recipe.dwell.readings
    return predict(train, visits, variances)


def _noise_on_range_w(meter: MeterCapabilities, power_w: float) -> float:
    fitting = [noise for full, noise in zip(meter.ranges_w, meter.noise_w, strict=True) if full >= power_w]
    return fitting[0] if fitting else meter.noise_w[-1]
