"""The same data through an independent least-squares program, with numeric slopes."""

from collections.abc import Mapping

import lmfit
import numpy as np
import pytest
from polarimetry_cases import half_wave_case, observe, plate_case, polarizer_case, sweep, truth_of

from rigctl.optics import Train, Visits, readings
from rigctl.optics.kernel import Array
from rigctl.polarimetry import Fit, Observed, fit

CASES = (
    (polarizer_case(), {"part.dial offset": 7.0, "part.extinction ratio": 4e-3}),
    (plate_case(), {"part.dial offset": -5.0, "part.retardance": 0.23}),
    (half_wave_case(), {"part.dial offset": 4.0, "part.retardance": 0.485}),
)


def peer(train: Train, visits: Visits, levels: Mapping[str, Observed], ours: Fit) -> lmfit.minimizer.MinimizerResult:
    """Fit in the numbers that people read, from a start a few uncertainties off, with our weights."""
    names = {f"p{k}": estimate for k, estimate in enumerate(ours.estimates)}
    parameters = lmfit.Parameters()
    for key, estimate in names.items():
        parameters.add(key, value=estimate.value + 3.0 * estimate.u)

    def residuals(trial: lmfit.Parameters) -> Array:
        x = {estimate.name: float(trial[key].value) for key, estimate in names.items()}
        fitted_w = readings(train, visits, x)
        rows = [(levels[d].power_w - fitted_w[d]) / ours.u_w[d] for d in levels]
        known = [(q.value - x[q.name]) / q.prior_u for q in train.fitted if q.prior_u is not None]
        return np.concatenate([*rows, known])

    tight = {"ftol": 1e-15, "xtol": 1e-15, "gtol": 1e-15}
    return lmfit.minimize(residuals, parameters, method="leastsq", scale_covar=False, **tight)


@pytest.mark.parametrize(("train", "unknowns"), CASES)
@pytest.mark.parametrize("seed", range(3))
def test_values_and_uncertainties_agree_with_lmfit(train: Train, unknowns: dict[str, float], seed: int) -> None:
    rng, visits = np.random.default_rng(seed), sweep()
    levels = observe(train, visits, {**truth_of(train, rng), **unknowns}, rng)

    ours = fit(train, visits, levels)
    theirs = peer(train, visits, levels, ours)

    assert theirs.chisqr == pytest.approx(ours.chi2, rel=1e-9)
    growth = np.sqrt(ours.chi2 / ours.dof) if any("multiplied" in note for note in ours.notes) else 1.0
    for key, estimate in zip(theirs.params, ours.estimates, strict=True):
        parameter = theirs.params[key]
        assert abs(parameter.value - estimate.value) < 1e-4 * estimate.u, estimate.name
        assert parameter.stderr * growth == pytest.approx(estimate.u, rel=2e-3), estimate.name
