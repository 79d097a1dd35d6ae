"""What the levels of a sweep are called: `22 degC`, a step's name, `200 uW`.

Pure text, so that a forecast, the simulated truth and the fit call them alike.
"""

from collections.abc import Mapping

from rigctl.files.recipe import Step
from rigctl.quantities import format_quantity

STEP = "step"


def level_labels(step: Step, asked: Mapping[str, float]) -> dict[str, str]:
    """Return the level of each temperature and current axis that a visit belongs to, and its step.

    Parameters
    ----------
    asked
        By role, degC or A.
    """
    kinds = {"temperature": "temperature", "current": "current"}
    labels = {
        axis.role: format_quantity(asked[axis.role], kinds[axis.kind]) for axis in step.sweep if axis.kind in kinds
    }
    return {**labels, STEP: step.name}


def range_labels(ranges_w: Mapping[str, float]) -> dict[str, str]:
    """Return the range level of each detector."""
    return {f"range of {role}": format_quantity(range_w, "power") for role, range_w in ranges_w.items()}
