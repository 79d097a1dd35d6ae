"""Both terms of the noise are found, also where one is thousands of times the other at most visits."""

import numpy as np
import pytest

from rigctl.polarimetry import Observed
from rigctl.polarimetry.variance import pooled_noise

READINGS = 4


def dwells(seed: int, *, floor_w: float, relative: float) -> tuple[Observed, np.ndarray]:
    """A turn of a polarizer at 1 mW, and ten darks."""
    source = np.random.default_rng(seed)
    mean_w = (
        np.concatenate([1e-3 * np.cos(np.linspace(0.0, 2.0 * np.pi, 72, endpoint=False)) ** 2, np.zeros(10)]) + 7e-7
    )
    sd_w = np.hypot(floor_w, relative * mean_w)
    levels = mean_w[:, None] + sd_w[:, None] * source.standard_normal((mean_w.size, READINGS))
    observed = Observed(levels.mean(axis=1), levels.std(axis=1, ddof=1), np.full(mean_w.size, READINGS))
    return observed, mean_w


@pytest.mark.parametrize(("floor_w", "relative"), [(2e-8, 5e-4), (2e-8, 1e-5), (1e-6, 5e-4), (2e-10, 5e-4)])
def test_both_terms_are_found_on_every_night(floor_w: float, relative: float) -> None:
    for seed in range(200):
        observed, mean_w = dwells(seed, floor_w=floor_w, relative=relative)

        noise = pooled_noise(observed, mean_w)

        assert noise is not None
        found = np.sqrt(noise.variance_w2(mean_w))
        true = np.hypot(floor_w, relative * mean_w)
        # 30 and more degrees of freedom at either end: 4 standard errors of a standard deviation are 0.52
        assert 0.48 < found[0] / true[0] < 1.52, seed
        assert 0.48 < found[-1] / true[-1] < 1.52, seed


def test_scatter_that_grows_with_power_is_never_taken_for_a_floor() -> None:
    observed, mean_w = dwells(1, floor_w=2e-8, relative=5e-4)

    noise = pooled_noise(observed, mean_w)

    assert noise is not None
    assert noise.c == pytest.approx(25e-8, rel=0.5)
