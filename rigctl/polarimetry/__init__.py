"""Unknowns of the optics from the readings of a sweep, and what can be known beforehand: pure arithmetic."""

from rigctl.polarimetry.fitting import fit
from rigctl.polarimetry.prediction import predict
from rigctl.polarimetry.results import (
    ChiSquaredSplit,
    Coupling,
    Estimate,
    Fit,
    Observed,
    Prediction,
    Refusal,
    as_dict,
)

__all__ = [
    "ChiSquaredSplit",
    "Coupling",
    "Estimate",
    "Fit",
    "Observed",
    "Prediction",
    "Refusal",
    "as_dict",
    "fit",
    "predict",
]
