"""From a start to the nearest least sum of squares, and the covariance there.

It owns Gauss-Newton with damping; it never chooses between solutions.
"""

from dataclasses import dataclass

import numpy as np

from rigctl.optics.kernel import Array
from rigctl.polarimetry.problem import Problem

MOST_STEPS = 60
CLOSE = 1e-6  # a step shorter than this, in standard uncertainties, changes nothing
BLIND = 1e-11  # relative singular value below which a direction is not followed
LEAST_DAMPING, MOST_DAMPING, EASE = 1e-4, 1e8, 10.0


@dataclass(frozen=True, slots=True, eq=False)
class Descent:
    """Where a descent stands: the numbers of the fit, residuals and slopes there, and the damping in use."""

    z: Array
    residuals: Array
    slopes: Array
    damping: float = 0.0

    @property
    def chi2(self) -> float:
        """Weighted sum of squares."""
        return float(self.residuals @ self.residuals)


def descend(problem: Problem, z: Array, *, most_steps: int = MOST_STEPS) -> Descent:
    """Walk down from `z`.

    Source
    ------
    K. Levenberg, Q. Appl. Math. 2, 164 (1944) and D. W. Marquardt, J. SIAM 11, 431 (1963), citations from
    memory: damped least squares in columns of unit length; undamped while that succeeds. No step goes farther
    than what is plausible for a quantity: where one is nearly blind it would be thrown beyond all meaning.
    """
    here = Descent(z, *problem.rows(z))
    for _ in range(most_steps):
        there = _step(problem, here)
        if there is None:
            break
        here = there
    return here


def _step(problem: Problem, here: Descent) -> Descent | None:
    """One step down, or None when there is none worth going."""
    lengths = np.linalg.norm(here.slopes, axis=0)
    scale = np.where(lengths > 0.0, lengths, 1.0)
    U, s, Vt = np.linalg.svd(here.slopes / scale, full_matrices=False)
    along = U.T @ here.residuals
    along[s <= BLIND * s[0]] = 0.0
    if float(np.linalg.norm(along)) <= CLOSE * max(1.0, np.sqrt(here.chi2)):
        return None
    damping = here.damping / EASE if here.damping > LEAST_DAMPING else 0.0
    farthest = problem.widths(here.z)
    while damping < MOST_DAMPING:
        step = Vt.T @ (along * s / (s * s + damping + np.finfo(float).tiny)) / scale
        step /= max(1.0, float(np.max(np.abs(step) / farthest)))
        there = Descent(here.z + step, *problem.rows(here.z + step), damping)
        if there.chi2 < here.chi2:
            return there
        damping = max(LEAST_DAMPING, EASE * damping)
    return None


def covariance(slopes: Array) -> Array:
    """Covariance of the fitted numbers, shape (P, P), from slopes in standard uncertainties.

    Source
    ------
    (J'J)^-1, JCGM 100:2008 annex H.3 for the linear case; by singular values of J with columns of unit
    length. Directions without any information are left out: whoever asks must hold them first.
    """
    lengths = np.linalg.norm(slopes, axis=0)
    scale = np.where(lengths > 0.0, lengths, 1.0)
    _, s, Vt = np.linalg.svd(slopes / scale, full_matrices=False)
    inverse = np.divide(1.0, s, out=np.zeros_like(s), where=s > BLIND * s[0])
    root = (Vt.T * inverse) / scale[:, None]
    product: Array = root @ root.T
    return product
