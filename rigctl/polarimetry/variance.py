"""The variance of a detector's readings as a function of the power, pooled over all its dwells.

It owns the noise model var(m) = a + c m^2; it never weighs a visit by that visit's own scatter, which
would favour the dwells that happened to look quiet.
"""

from dataclasses import dataclass

import numpy as np

from rigctl.optics.kernel import Array
from rigctl.polarimetry.results import Observed

PASSES = 40  # both terms settle to 1e-6 in thirty where they are apart
FLOOR = 1e-9  # smallest relative noise that is believed, far below any detector's


@dataclass(frozen=True, slots=True)
class Noise:
    """Variance of one reading: a (W^2) and c (relative, squared)."""

    a_w2: float
    c: float

    def variance_w2(self, power_w: Array) -> Array:
        """Variance of one reading at each power, W^2."""
        return self.a_w2 + self.c * np.square(power_w)


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
    A sample variance of normal readings is a gamma variate of mean var and shape (n - 1)/2 (JCGM 100:2008, E.4.3,
    from memory). Its likelihood is climbed by multiplicative steps, which keep both terms positive and never go
    down: D. R. Hunter, K. Lange, "A tutorial on MM algorithms", Am. Stat. 58, 30 (2004), from memory. Weighted
    least squares with weights that follow the fit flips between the two terms where one of them dominates.
    """
    use = (observed.n >= 2) & np.isfinite(observed.sd_w) & np.isfinite(observed.power_w)
    sample, freedom = np.square(observed.sd_w[use]), observed.n[use] - 1.0
    if not np.any(sample > 0.0):
        return None
    power2 = np.square(mean_w[use])
    floor = FLOOR**2 * float(np.max(power2)) + np.finfo(float).tiny
    a_w2, c = _first_guess(sample, power2, floor)
    for _ in range(PASSES):
        for powers in (np.ones_like(power2), power2):
            variance = a_w2 + c * power2 + floor
            pull = np.sum(freedom * sample * powers / variance**2)
            step = float(np.sqrt(pull / (np.sum(freedom * powers / variance) + np.finfo(float).tiny)))
            a_w2, c = (a_w2, c * step) if powers is power2 else (a_w2 * step, c)
    return Noise(max(a_w2, floor), c)


def _first_guess(sample: Array, power2: Array, floor: float) -> tuple[float, float]:
    """Both terms from where each shows best: the darkest and the brightest quarter of the dwells."""
    order = np.argsort(power2)
    quarter = max(1, order.size // 4)
    dark, bright = order[:quarter], order[-quarter:]
    c = float(np.mean(sample[bright])) / (float(np.mean(power2[bright])) + floor)
    return float(np.mean(sample[dark])) + floor, c
