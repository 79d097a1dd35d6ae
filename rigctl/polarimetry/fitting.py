"""From readings to estimates.

It owns the order of the work: weights, start, descent, what must be refused, which of several equal
solutions is told. It never draws on anything but the train as written and the readings.
"""

from collections.abc import Mapping, Sequence
from dataclasses import replace

import numpy as np

from rigctl.errors import UndecidedError
from rigctl.optics.forward import readings
from rigctl.optics.kernel import Array, Flags
from rigctl.optics.parts import Quantity, range_key
from rigctl.optics.train import Train
from rigctl.optics.visits import Levels, Visits
from rigctl.polarimetry.arranging import arranged
from rigctl.polarimetry.coordinates import WIDTHS, beyond_edge, estimate_of, in_fit_forms, to_fit, to_people
from rigctl.polarimetry.descent import Descent, covariance, descend
from rigctl.polarimetry.knowledge import guarded, refusals
from rigctl.polarimetry.problem import Problem
from rigctl.polarimetry.results import Estimate, Fit, Observed
from rigctl.polarimetry.scatter import Scatter, scatter
from rigctl.polarimetry.split import split_chi2
from rigctl.polarimetry.start import starts
from rigctl.polarimetry.symmetry import Symmetries, symmetries
from rigctl.polarimetry.variance import reading_variances

REWEIGHTINGS = 2  # the weights follow the fitted power, and settle in two rounds
GUESS, SILENCE = 1e-3, 1e-9  # relative noise of dwells without scatter: at first, and at least
SCOUT_STEPS = 20  # enough to tell a good basin from a bad one, also along a curved valley
HOPELESS = 10.0  # times the best chi-squared of all scouts
ALIKE = 1.0  # rise of chi-squared that one standard uncertainty makes
FAR = 3.0  # tolerances
BY_NOISE = 6.0  # standard uncertainties
NEARLY_AS_WELL = 9.0  # rise of chi-squared that three standard uncertainties make


def fit(train: Train, visits: Visits, levels: Mapping[str, Observed]) -> Fit:
    """Find the unknowns of a train.

    Parameters
    ----------
    train
        The train as people wrote it; quantities that are neither unknown nor free nor uncertain are exact.
    visits
        Settings of n visits, dark ones included.
    levels
        What each detector read there; a detector of the train that is not among them was not read.

    Returns
    -------
    The estimates, what they are worth, and what cannot be told.

    Raises
    ------
    UndecidedError
        When there is no reading at all.
    """
    problem = _problem(arranged(train, visits, levels.keys()), visits, levels)
    moves = symmetries(problem.asked, visits)
    best, rivals = _search(problem, moves)
    for _ in range(REWEIGHTINGS):
        problem = guarded(_reweighted(problem, levels, best.z), best.z)
        best = descend(problem, best.z)
    chosen = moves.nearest(_people(problem, best.z))
    best = descend(problem, _fit_numbers(problem, best.z, chosen))
    verdict = scatter(best.chi2, problem.dof, {d.name: levels[d.name] for d in problem.asked.detectors}, visits)
    return _result(problem, best, chosen, (*moves.sentences(), *rivals), verdict=verdict)


def _problem(train: Train, visits: Visits, levels: Mapping[str, Observed]) -> Problem:
    names = [d.name for d in train.detectors]
    level_w = {name: np.where(_counts(levels[name]), levels[name].power_w, 0.0) for name in names}
    weight = {
        name: _weight(levels[name], w, visits.levels.get(range_key(name)), GUESS * float(np.max(np.abs(w)) or 1.0))
        for name, w in level_w.items()
    }
    problem = Problem(train, in_fit_forms(train, visits), visits, level_w, weight)
    if not problem.row_count:
        raise UndecidedError("there is no reading to fit", do="Run the recipe, or resume the run.")
    return problem


def _counts(observed: Observed) -> Flags:
    return np.isfinite(observed.power_w) & (observed.n >= 1)


def _weight(observed: Observed, mean_w: Array, ranges: Levels | None, silent_w: float) -> Array:
    """1 over the standard uncertainty of each mean; 0 where nothing was read.

    On a range whose dwells show no scatter each mean is taken to be uncertain by `silent_w`.
    """
    variance_w2, counts = reading_variances(observed, mean_w, ranges), _counts(observed)
    of_mean_w2 = np.where(np.isnan(variance_w2), silent_w**2, variance_w2 / np.where(counts, observed.n, 1.0))
    return np.where(counts, of_mean_w2**-0.5, 0.0)


def _silent_w(misses_w: Array, level_w: Array) -> float:
    brightest_w = float(np.max(np.abs(level_w), initial=0.0)) or 1.0
    return max(float(np.sqrt(np.mean(np.square(misses_w)))), SILENCE * brightest_w)


def _reweighted(problem: Problem, levels: Mapping[str, Observed], z: Array) -> Problem:
    weight = {}
    for name, fitted_w in readings(problem.train, problem.visits, problem.values(z)).items():
        level_w = problem.level_w[name]
        misses_w = (level_w - fitted_w)[problem.weight[name] > 0.0]
        ranges = problem.visits.levels.get(range_key(name))
        weight[name] = _weight(levels[name], fitted_w, ranges, _silent_w(misses_w, level_w))
    return replace(problem, weight=weight)


def _search(problem: Problem, moves: Symmetries) -> tuple[Descent, tuple[str, ...]]:
    """The best of all basins, and sentences about others nearly as good and not merely its image."""
    points = _distinct(problem, moves, starts(problem))
    held = guarded(problem, points[0])
    scouts = [descend(held, z, most_steps=SCOUT_STEPS) for z in points]
    hope = NEARLY_AS_WELL + HOPELESS * min(scout.chi2 for scout in scouts)
    walked = [descend(held, scout.z) for scout in scouts if scout.chi2 <= hope]
    best = min(walked, key=lambda descent: (_is_impossible(held, descent), descent.chi2))
    walked += [descend(held, z) for z in _nearer(held, moves, best.z)]
    found = sorted(walked, key=lambda descent: _rank(held, moves, descent, best))
    rivals = [d.z for d in found if d.chi2 < found[0].chi2 + NEARLY_AS_WELL and not _is_impossible(held, d)]
    homes = _distinct(held, moves, [found[0].z, *rivals], near=1e-2)
    return found[0], tuple(_rival(held, moves, z) for z in homes[1:])


def _nearer(problem: Problem, moves: Symmetries, z: Array) -> list[Array]:
    """The same solution with its angles where they were said to be, if it lies far from there.

    The sweep may have a mirror image that is no simple move, and the grid may have shown that one alone.
    """
    home = moves.nearest(_people(problem, z))
    if all(abs(home[q.name] - q.value) <= FAR * (q.u or np.inf) for q in moves.unknowns):
        return []
    angles = {q.name: q.value for q in moves.unknowns if q.kind == "angle" and q.u}
    return [np.array([angles.get(name, v) for name, v in zip(problem.names, z, strict=True)])]


def _rank(problem: Problem, moves: Symmetries, descent: Descent, best: Descent) -> tuple[bool, float, float]:
    """Order among solutions: possible ones first, the best fit first, of those alike the nearest to the nominal."""
    excess = max(0.0, descent.chi2 - best.chi2 - ALIKE)
    home = moves.nearest(_people(problem, descent.z))
    return _is_impossible(problem, descent), excess, moves.distance(home)


def _is_impossible(problem: Problem, descent: Descent) -> bool:
    """Whether a cosine lies beyond its edge, or a ratio below 0, by more than noise can carry it."""
    excess = [beyond_edge(q.kind, float(v)) for q, v in zip(problem.fitted, descent.z, strict=True)]
    u = np.sqrt(np.diag(covariance(descent.slopes)))
    return bool(np.any(np.array(excess) > BY_NOISE * u))


def _distinct(problem: Problem, moves: Symmetries, points: Sequence[Array], near: float = 0.1) -> list[Array]:
    """The points that are not images of an earlier one, in steps of what is plausible."""
    kept: list[Array] = []
    homes: list[Array] = []
    for z in points:
        home = moves.nearest(_people(problem, z))
        place = np.array([home[q.name] / WIDTHS[q.kind] for q in moves.unknowns])
        if all(np.max(np.abs(place - other), initial=0.0) > near for other in homes):
            kept.append(z)
            homes.append(place)
    return kept


def _rival(problem: Problem, moves: Symmetries, z: Array) -> str:
    home = moves.nearest(_people(problem, z))
    values = ", ".join(f"{q.name} = {home[q.name]:.6g}" for q in moves.unknowns)
    return f"nearly as good: {values}"


def _people(problem: Problem, z: Array) -> dict[str, float]:
    """The fitted numbers as people read them."""
    return {q.name: to_people(q.kind, float(v))[0] for q, v in zip(problem.fitted, z, strict=True)}


def _fit_numbers(problem: Problem, z: Array, chosen: Mapping[str, float]) -> Array:
    """The numbers of the fit at the chosen solution; a cosine beyond its edge stays there."""
    moved = {"angle", "retardance", "coefficient"}
    return np.array(
        [to_fit(q.kind, chosen[q.name]) if q.kind in moved else v for q, v in zip(problem.fitted, z, strict=True)]
    )


def _result(
    problem: Problem,
    best: Descent,
    chosen: Mapping[str, float],
    equivalents: tuple[str, ...],
    *,
    verdict: Scatter,
) -> Fit:
    matrix = covariance(best.slopes) * verdict.growth**2
    told = [k for k, name in enumerate(problem.names) if name not in problem.held]
    slopes = np.array([to_people(q.kind, float(v))[1] for q, v in zip(problem.fitted, best.z, strict=True)])
    return Fit(
        estimates=tuple(estimates(problem, best.z, matrix, chosen)),
        covariance=(matrix * np.outer(slopes, slopes))[np.ix_(told, told)],
        chi2=best.chi2,
        dof=problem.dof,
        split=split_chi2(problem, best.chi2),
        equivalents=equivalents,
        refusals=refusals(problem, best.z),
        notes=verdict.notes(),
        fitted_w=readings(problem.train, problem.visits, problem.values(best.z)),
        u_w={n: np.divide(1.0, w, out=np.full_like(w, np.inf), where=w > 0.0) for n, w in problem.weight.items()},
    )


def estimates(problem: Problem, z: Array, matrix: Array, chosen: Mapping[str, float]) -> list[Estimate]:
    """Every quantity that is not held, as it is reported."""
    asked: Mapping[str, Quantity] = problem.asked.quantities
    u = np.sqrt(np.diag(matrix))
    return [
        estimate_of(asked[q.name], q.kind, value=chosen[q.name], fitted=float(z[k]), u=float(u[k]))
        for k, q in enumerate(problem.fitted)
        if q.name not in problem.held
    ]
