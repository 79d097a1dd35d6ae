"""The same data through an independent least-squares program, with numeric slopes."""

from collections.abc import Mapping

import lmfit
import numpy as np
import pytest
from polarimetry_cases import (
    at_ovens,
    empty_pair_and_three_ovens,
    empty_pair_case,
    half_wave_case,
    monitored_case,
    observe,
    on_two_ranges,
    plate_case,
    polarizer_case,
    steps,
    sweep,
    three_ovens_case,
    truth_of,
    warm_case,
    without,
)

from rigctl.optics import Train, Visits, readings
from rigctl.optics.kernel import Array
from rigctl.polarimetry import Fit, Observed, fit
from rigctl.polarimetry.arranging import arranged

PAIR = {"part.dial offset": 2.0, "exit cube.axis": 23.0}
OVENS = {"part.retardance @ 22 degC": 0.24, "part.retardance @ 25 degC": 0.246, "part.retardance @ 28 degC": 0.25}
STRAYS = {"signal.stray light @ 2 uW": 3e-9, "signal.stray light @ 1 mW": 2e-7, "signal.gain @ 2 uW": 1.003}


def dim_and_bright() -> Visits:
    visits, train = sweep(step_deg=2.5), polarizer_case()
    return on_two_ranges(
        visits, readings(train, visits, {"part.dial offset": 7.0, "part.extinction ratio": 4e-5})["signal"]
    )


CASES: tuple[tuple[Train, Visits, dict[str, float]], ...] = (
    (polarizer_case(), sweep(), {"part.dial offset": 7.0, "part.extinction ratio": 4e-3}),
    (plate_case(), sweep(), {"part.dial offset": -5.0, "part.retardance": 0.23}),
    (half_wave_case(), sweep(), {"part.dial offset": 4.0, "part.retardance": 0.485}),
    (empty_pair_case(), steps(without(sweep(), "part"), sweep()), {**PAIR, "part.retardance": 0.24}),
    (three_ovens_case(), empty_pair_and_three_ovens(), {**PAIR, **OVENS}),
    (
        warm_case(),
        at_ovens(sweep(step_deg=10.0), 20.0, 30.0),
        {"part.dial offset": 2.0, "part.retardance": 0.49, "part.temperature coefficient": 3e-4},
    ),
    (
        monitored_case(),
        sweep(),
        {"part.dial offset": 7.0, "part.extinction ratio": 4e-3, "splitter.fraction": 0.045},
    ),
    (
        polarizer_case(),
        dim_and_bright(),
        {**STRAYS, "part.dial offset": 7.0, "part.extinction ratio": 4e-5, "source.power": 1e-3},
    ),
)
NAMES = (
    "polarizer",
    "plate",
    "half-wave plate",
    "empty pair and plate",
    "empty pair and plate at three temperatures",
    "temperature coefficient",
    "monitor",
    "two ranges",
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


@pytest.mark.parametrize(("train", "visits", "unknowns"), CASES, ids=NAMES)
@pytest.mark.parametrize("seed", range(3))
def test_values_and_uncertainties_agree_with_lmfit(
    train: Train, visits: Visits, unknowns: dict[str, float], seed: int
) -> None:
    rng, told = np.random.default_rng(seed), arranged(train, visits, [d.name for d in train.detectors])
    levels = observe(told, visits, {**truth_of(told, rng), **unknowns}, rng)

    ours = fit(train, visits, levels)
    theirs = peer(told, visits, levels, ours)

    assert theirs.chisqr == pytest.approx(ours.chi2, rel=1e-9)
    growth = np.sqrt(ours.chi2 / ours.dof) if any("multiplied" in note for note in ours.notes) else 1.0
    for key, estimate in zip(theirs.params, ours.estimates, strict=True):
        parameter = theirs.params[key]
        assert abs(parameter.value - estimate.value) < 1e-4 * estimate.u, estimate.name
        assert parameter.stderr * growth == pytest.approx(estimate.u, rel=2e-3), estimate.name
