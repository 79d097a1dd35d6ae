"""The variance of a detector's readings as a function of the power, pooled over all its dwells on a range.

It owns the noise model var(m) = a + c m^2; it never weighs a visit by that visit's own scatter, which
would favour the dwells that happened to look quiet.
"""

from dataclasses import dataclass

import numpy as np

from rigctl.optics.kernel import Array
from rigctl.optics.visits import Levels
from rigctl.polarimetry.results import Observed

PASSES = 4  # scoring steps; the weights settle to 1e-3 in three
FLOOR = 1e-9  # smallest relative noise that is believed, far below any detector's


@dataclass(frozen=True, slots=True)
class Noise:
    """Variance of one reading: a (W^2) and c (relative, squared)."""

    a_w2: float
    c: float

    def variance_w2(self, power_w: Array) -> Array:
        """Variance of one reading at each power, W^2."""
        return self.a_w2 + self.c * np.square(power_w)


def reading_variances(observed: Observed, mean_w: Array, ranges: Levels | None) -> Array:
    """Variance of one reading at each visit, shape (n,), W^2; nan where no dwell of its range shows scatter.

    Parameters
    ----------
    observed, mean_w
        As for `pooled_noise`.
    ranges
        The detector's range at each visit: each has a noise of its own. None: one range.
    """
    index = np.zeros(mean_w.size, dtype=np.intp) if ranges is None else ranges.index
    variance_w2 = np.full(mean_w.size, np.nan)
    for k in np.unique(index):
        own = index == k
        noise = pooled_noise(observed.rows(own), mean_w[own])
        if noise is not None:
            variance_w2[own] = noise.variance_w2(mean_w[own])
    return variance_w2


def pooled_noise(observed: Observed, mean_w: Array) -> Noise | None:
    """Noise of one detector from the scatter within its dwells.

    Parameters
    ----------
    observed
        Its dwells; those of one reading tell nothing about scatter.
    mean_w
        The power at each visit, best from a fit: the readings' own mean leans towards its scatter.

    Returns
    -------
    The noise, both terms at least 0, or None when no dwell shows scatter.

    Source
    ------
    A sample variance of normal readings has variance 2 var^2/(n - 1) (JCGM 100:2008, E.4.3, from memory);
    weighted least squares with these weights, iterated, is the maximum-likelihood fit of gamma variates.
    """
    use = (observed.n >= 2) & np.isfinite(observed.sd_w) & np.isfinite(observed.power_w)
    sample, freedom = np.square(observed.sd_w[use]), observed.n[use] - 1.0
    if not np.any(sample > 0.0):
        return None
    power2 = np.square(mean_w[use])
    floor = FLOOR**2 * float(np.max(power2)) + np.finfo(float).tiny
    noise = Noise(float(np.average(sample, weights=freedom)), 0.0)
    for _ in range(PASSES):
        root = np.sqrt(freedom) / (noise.a_w2 + noise.c * power2 + floor)
        noise = _two_term(sample, power2, root)
    return Noise(max(noise.a_w2, floor), noise.c)


def _two_term(sample: Array, power2: Array, root: Array) -> Noise:
    """Least squares of a + c m^2 with both terms at least 0."""
    scale = float(np.max(power2)) or 1.0
    design = np.stack([np.ones_like(power2), power2 / scale], axis=-1) * root[:, None]
    solution, *_ = np.linalg.lstsq(design, sample * root, rcond=1e-12)
    if np.all(solution >= 0.0):
        return Noise(float(solution[0]), float(solution[1]) / scale)
    alone = [max(0.0, float(column @ (sample * root) / (column @ column))) for column in design.T]
    misfit = [float(np.sum((sample * root - a * column) ** 2)) for a, column in zip(alone, design.T, strict=True)]
    return Noise(alone[0], 0.0) if misfit[0] <= misfit[1] else Noise(0.0, alone[1] / scale)
