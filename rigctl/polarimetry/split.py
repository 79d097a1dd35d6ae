"""Chi-squared in two parts, two different sentences for whoever reads it.

It owns the sum of harmonics that any train with one turning mount gives; it never looks at the train's
values. What no harmonics explain is noise, outliers or wander; what harmonics explain and the train does
not is a wrong train.
"""

import numpy as np

from rigctl.optics.kernel import Array
from rigctl.optics.visits import Visits
from rigctl.polarimetry.problem import Problem
from rigctl.polarimetry.results import ChiSquaredSplit


def split_chi2(problem: Problem, chi2: float) -> ChiSquaredSplit | None:
    """Split chi-squared, or None when the sweep turns not exactly one mount or is too short.

    Source
    ------
    A Mueller element turned by h contributes harmonics 0, 2 and 4 of h, k of them 0, 2 .. 4k; a linear
    drift multiplies each by the time. The train's readings lie in the span of these columns, so the
    difference of the two sums of squares is chi-squared with the difference of their degrees of freedom.
    """
    mount = _only_turning(problem.visits)
    if mount is None:
        return None
    count = sum(element.mount == mount for element in problem.train.elements)
    basis = _basis(problem.visits, mount, count)
    sums = [_misfit(basis, problem.level_w[d], weight) for d, weight in problem.weight.items()]
    rest, rest_dof = sum(misfit for misfit, _ in sums), sum(dof for _, dof in sums)
    if rest_dof < 1 or problem.dof - rest_dof < 1:
        return None
    return ChiSquaredSplit(rest, rest_dof, max(0.0, chi2 - rest), problem.dof - rest_dof)


def _only_turning(visits: Visits) -> str | None:
    turning = [mount for mount, angles in visits.angle_deg.items() if np.ptp(angles[visits.is_open]) > 0.0]
    return turning[0] if len(turning) == 1 else None


def _basis(visits: Visits, mount: str, count: int) -> Array:
    theta = np.deg2rad(visits.angle_deg[mount])
    waves = [np.ones_like(theta)]
    for harmonic in range(2, 4 * count + 1, 2):
        waves += [np.cos(harmonic * theta), np.sin(harmonic * theta)]
    steady = np.stack(waves, axis=-1) * visits.is_open[:, None]
    drifting = steady * visits.centred_h[:, None]
    return np.concatenate([steady, drifting, np.ones((visits.count, 1))], axis=1)


def _misfit(basis: Array, level_w: Array, weight: Array) -> tuple[float, int]:
    lengths = np.linalg.norm(basis, axis=0)
    columns = basis / np.where(lengths > 0.0, lengths, 1.0) * weight[:, None]
    target = level_w * weight
    solution, _, rank, _ = np.linalg.lstsq(columns, target, rcond=1e-10)
    residual = target - columns @ solution
    return float(residual @ residual), int(np.count_nonzero(weight)) - int(rank)
