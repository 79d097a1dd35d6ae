"""How well a sweep will determine its unknowns, before any light is on.

It owns the judgement at the nominal values; it never needs a reading.
"""

from collections.abc import Mapping

import numpy as np

from rigctl.optics.kernel import Array
from rigctl.optics.train import Train
from rigctl.optics.visits import Visits
from rigctl.polarimetry.arranging import arranged
from rigctl.polarimetry.coordinates import in_fit_forms
from rigctl.polarimetry.descent import covariance
from rigctl.polarimetry.fitting import estimates
from rigctl.polarimetry.knowledge import couplings, guarded, refusals
from rigctl.polarimetry.problem import Problem
from rigctl.polarimetry.results import Prediction
from rigctl.polarimetry.symmetry import symmetries


def predict(train: Train, visits: Visits, var_w2: Mapping[str, Array]) -> Prediction:
    """Standard uncertainty of every fitted quantity at the nominal values.

    Parameters
    ----------
    train
        The train as people wrote it.
    visits
        Settings of n visits, dark ones included.
    var_w2
        By detector: expected variance of each visit's mean, shape (n,), W^2; a detector of the train that is not
        among them is not read.

    Returns
    -------
    Uncertainties, what is poorly separated, what cannot be told apart, and what would be refused.

    Source
    ------
    Bound of the linearized least squares, (J'J)^-1 with slopes J in standard uncertainties.
    """
    train = arranged(train, visits, var_w2.keys())
    weight = {d.name: 1.0 / np.sqrt(var_w2[d.name]) for d in train.detectors}
    level_w = {name: np.zeros(visits.count) for name in weight}
    bare = Problem(train, in_fit_forms(train, visits), visits, level_w, weight)
    problem = guarded(bare, bare.nominal)
    _, slopes = problem.rows(bare.nominal)
    nominal = {q.name: train.quantities[q.name].value for q in bare.fitted}
    return Prediction(
        estimates=tuple(estimates(problem, bare.nominal, covariance(slopes), nominal)),
        couplings=couplings(problem, bare.nominal, slopes),
        equivalents=symmetries(train, visits).sentences(),
        refusals=refusals(problem, bare.nominal),
    )
