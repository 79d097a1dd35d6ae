"""Chi-squared in two parts, two different sentences for whoever reads it.

It owns the sum of harmonics that any train with one turning mount gives while nothing else changes; it never
looks at the train's values. What no harmonics explain is noise, outliers or wander; what harmonics explain and
the train does not is a wrong train.
"""

import numpy as np

from rigctl.optics.kernel import Array, Indices
from rigctl.optics.parts import STRAY_LIGHT
from rigctl.optics.visits import Visits, groups
from rigctl.polarimetry.coordinates import changes_with_warmth
from rigctl.polarimetry.problem import Problem
from rigctl.polarimetry.results import ChiSquaredSplit


def split_chi2(problem: Problem, chi2: float) -> ChiSquaredSplit | None:
    """Split chi-squared, or None when the sweep turns not exactly one mount or is too short.

    Visits between which anything but that mount changes (elements taken out, levels, a temperature that matters)
    have harmonics of their own.

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
    basis = _basis(problem.visits, mount, count, _groups(problem))
    if basis.shape[1] >= np.count_nonzero(problem.visits.is_open):
        return None
    sums = [_misfit(_with_stray(problem, basis, d), problem.level_w[d], weight) for d, weight in problem.weight.items()]
    rest, rest_dof = sum(misfit for misfit, _ in sums), sum(dof for _, dof in sums)
    if rest_dof < 1 or problem.dof - rest_dof < 1:
        return None
    return ChiSquaredSplit(rest, rest_dof, max(0.0, chi2 - rest), problem.dof - rest_dof)


def _only_turning(visits: Visits) -> str | None:
    turning = [mount for mount, angles in visits.angle_deg.items() if np.ptp(angles[visits.is_open]) > 0.0]
    return turning[0] if len(turning) == 1 else None


def _groups(problem: Problem) -> Indices:
    """Number of the group of each visit: within one, nothing changes but the angle and the time."""
    visits, train = problem.visits, problem.asked
    keys = {q.each for q in train.quantities.values() if q.each is not None}
    warm = {e.warmed_by for e in train.elements if changes_with_warmth(train, e)}
    columns = [
        *(visits.present[e.name] for e in train.elements if e.name in visits.present),
        *(visits.levels[key].index for key in sorted(keys)),
        *(visits.temperature_c[role] for role in sorted(role for role in warm if role is not None)),
    ]
    return groups(columns, visits.count)


def _basis(visits: Visits, mount: str, count: int, group: Indices) -> Array:
    theta = np.deg2rad(visits.angle_deg[mount])
    waves = [np.ones_like(theta)]
    for harmonic in range(2, 4 * count + 1, 2):
        waves += [np.cos(harmonic * theta), np.sin(harmonic * theta)]
    openness = visits.is_open * (1.0 if visits.power is None else visits.power)
    steady = np.stack(waves, axis=-1) * openness[:, None]
    both = np.concatenate([steady, steady * visits.centred_h[:, None]], axis=1)
    return np.concatenate([both * (group == k)[:, None] for k in np.unique(group[visits.is_open])], axis=1)


def _with_stray(problem: Problem, basis: Array, detector: str) -> Array:
    """The basis with a constant for the detector's stray light, one for each of its levels."""
    each = problem.asked.quantities[f"{detector}.{STRAY_LIGHT}"].each
    index = np.zeros(len(basis), dtype=np.intp) if each is None else problem.visits.levels[each].index
    constants = [index == k for k in np.unique(index)]
    return np.concatenate([basis, np.stack(constants, axis=-1)], axis=1)


def _misfit(basis: Array, level_w: Array, weight: Array) -> tuple[float, int]:
    lengths = np.linalg.norm(basis, axis=0)
    columns = basis / np.where(lengths > 0.0, lengths, 1.0) * weight[:, None]
    target = level_w * weight
    solution, _, rank, _ = np.linalg.lstsq(columns, target, rcond=1e-10)
    residual = target - columns @ solution
    return float(residual @ residual), int(np.count_nonzero(weight)) - int(rank)
