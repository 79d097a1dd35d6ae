"""Which power to expect at a detector, so that its range can be fixed before the beam is let in.

Pure: a function of the recipe.
"""

from rigctl.files.recipe import Recipe
from rigctl.runner.plan import step_visits


def expected_peak_w(recipe: Recipe, role: str) -> float:
    """Return the largest power that the recipe's nominal values give at a detector in any visit, W.

    Three standard uncertainties of the source's power are added, so that a source on the bright side does not
    overload the range.
    """
    import numpy as np

    from rigctl.files.arrangement import train_of
    from rigctl.optics import Visits, readings

    train = train_of(recipe)
    nominal = {name: quantity.value for name, quantity in train.quantities.items()}
    peak_w = 0.0
    for step in recipe.steps:
        asked = [visit.asked_deg for visit in step_visits(step)]
        angles = {axis.role: np.array([angles[axis.role] for angles in asked]) for axis in step.sweep}
        visits = Visits(angle_deg=angles, is_open=np.ones(len(asked)), time_h=np.zeros(len(asked)))
        peak_w = max(peak_w, float(np.max(readings(train, visits, nominal)[role])))
    power = recipe.source.power
    margin = 1.0 + 3.0 * (power.u or 0.0) / power.value if power is not None else 1.5
    return peak_w * margin
