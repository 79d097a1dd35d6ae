"""From readings to estimates.

It owns the order of the work: weights, start, descent, what must be refused, which of several equal
solutions is told. It never draws on anything but the train as written and the readings.
"""

from collections.abc import Mapping, Sequence

import numpy as np

from rigctl.errors import UndecidedError
from rigctl.optics.forward import readings
from rigctl.optics.kernel import Array, Flags
from rigctl.optics.train import Quantity, Train
from rigctl.optics.visits import Visits
from rigctl.polarimetry.coordinates import WIDTHS, beyond_edge, estimate_of, in_fit_forms, to_fit, to_people
from rigctl.polarimetry.descent import Descent, covariance, descend
from rigctl.polarimetry.knowledge import guarded, refusals
from rigctl.polarimetry.problem import Problem
from rigctl.polarimetry.results import Estimate, Fit, Observed
from rigctl.polarimetry.split import split_chi2
from rigctl.polarimetry.start import starts
from rigctl.polarimetry.symmetry import Symmetries, symmetries
from rigctl.polarimetry.variance import pooled_noise

REWEIGHTINGS = 2  # the weights follow the fitted power, and settle in two rounds
SCOUT_STEPS = 20  # enough to tell a good basin from a bad one
BY_NOISE = 6.0  # standard uncertainties
NEARLY_AS_WELL = 9.0  # rise of chi-squared that three standard uncertainties make
Z995 = 2.5758293035489004  # two-sided 99 % quantile of the normal distribution


def fit(train: Train, visits: Visits, levels: Mapping[str, Observed]) -> Fit:
    """Find the unknowns of a train.

    Parameters
    ----------
    train
        The train as people wrote it; quantities that are neither unknown nor free nor uncertain are exact.
    visits
        Settings of n visits, dark ones included.
    levels
        What each detector of the train read there.

    Returns
    -------
    The estimates, what they are worth, and what cannot be told.

    Raises
    ------
    UndecidedError
        When there is no reading at all.
    """
    problem = _problem(train, visits, levels)
    moves = symmetries(train, visits)
    best, rivals = _search(problem, moves)
    for _ in range(REWEIGHTINGS):
        problem = guarded(_reweighted(problem, levels, best.z), best.z)
        best = descend(problem, best.z)
    chosen = moves.nearest(_people(problem, best.z))
    best = descend(problem, _fit_numbers(problem, best.z, chosen))
    return _result(problem, best, chosen, (*moves.sentences(), *rivals), notes=_scatterless(levels))


def _problem(train: Train, visits: Visits, levels: Mapping[str, Observed]) -> Problem:
    names = [d.name for d in train.detectors]
    level_w = {name: np.where(_counts(levels[name]), levels[name].power_w, 0.0) for name in names}
    weight = {name: _weight(levels[name], level_w[name]) for name in names}
    problem = Problem(train, in_fit_forms(train, visits), visits, level_w, weight)
    if not problem.row_count:
        raise UndecidedError("there is no reading to fit", do="Run the recipe, or resume the run.")
    return problem


def _counts(observed: Observed) -> Flags:
    return np.isfinite(observed.power_w) & (observed.n >= 1)


def _weight(observed: Observed, mean_w: Array) -> Array:
    """1 over the standard uncertainty of each mean; 0 where nothing was read."""
    noise = pooled_noise(observed, mean_w)
    variance = np.ones_like(mean_w) if noise is None else noise.variance_w2(mean_w)
    counts = _counts(observed)
    return np.where(counts, np.sqrt(np.where(counts, observed.n, 1.0) / variance), 0.0)


def _reweighted(problem: Problem, levels: Mapping[str, Observed], z: Array) -> Problem:
    fitted_w = readings(problem.train, problem.visits, problem.values(z))
    weight = {name: _weight(levels[name], level) for name, level in fitted_w.items()}
    return Problem(problem.asked, problem.train, problem.visits, problem.level_w, weight, problem.held)


def _scatterless(levels: Mapping[str, Observed]) -> tuple[str, ...]:
    silent = [name for name, observed in levels.items() if pooled_noise(observed, observed.power_w) is None]
    return tuple(
        f"the readings of {n} show no scatter within a dwell: weighed by the fit's own" for n in silent
    )


def _search(problem: Problem, moves: Symmetries) -> tuple[Descent, tuple[str, ...]]:
    """The best of all basins, and sentences about others nearly as good and not merely its image."""
    points = _distinct(problem, moves, starts(problem))
    held = guarded(problem, points[0])
    walked = (descend(held, z, most_steps=SCOUT_STEPS) for z in points)
    found = sorted(walked, key=lambda descent: (_is_impossible(held, descent), descent.chi2))
    rivals = [d.z for d in found if d.chi2 < found[0].chi2 + NEARLY_AS_WELL and not _is_impossible(held, d)]
    homes = _distinct(held, moves, [found[0].z, *rivals], near=1e-2)
    return found[0], tuple(_rival(held, moves, z) for z in homes[1:])


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
    moved = {"angle", "retardance"}
    return np.array(
        [
            to_fit(q.kind, chosen[q.name]) if q.kind in moved else v
            for q, v in zip(problem.fitted, z, strict=True)
        ]
    )


def _result(
    problem: Problem,
    best: Descent,
    chosen: Mapping[str, float],
    equivalents: tuple[str, ...],
    *,
    notes: tuple[str, ...],
) -> Fit:
    growth = _growth(best.chi2, problem.dof, is_scaled=bool(notes))
    matrix = covariance(best.slopes) * growth**2
    told = [k for k, name in enumerate(problem.names) if name not in problem.held]
    slopes = np.array([to_people(q.kind, float(v))[1] for q, v in zip(problem.fitted, best.z, strict=True)])
    in_people = matrix * np.outer(slopes, slopes)
    return Fit(
        estimates=tuple(estimates(problem, best.z, matrix, chosen)),
        covariance=in_people[np.ix_(told, told)],
        chi2=best.chi2,
        dof=problem.dof,
        split=split_chi2(problem, best.chi2),
        equivalents=equivalents,
        refusals=refusals(problem, best.z),
        notes=(*notes, *_scatter_notes(best.chi2, problem.dof, growth, is_scaled=bool(notes))),
        fitted_w=readings(problem.train, problem.visits, problem.values(best.z)),
        u_w={
            n: np.divide(1.0, w, out=np.full_like(w, np.inf), where=w > 0.0)
            for n, w in problem.weight.items()
        },
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


def _growth(chi2: float, dof: int, *, is_scaled: bool) -> float:
    """Factor on all standard uncertainties: 1 while chi-squared is within its 99 % band.

    Source
    ------
    R. T. Birge, Phys. Rev. 40, 207 (1932), citation from memory: the square root of chi-squared per
    degree of freedom.
    """
    if dof and (is_scaled or chi2 > chi2_band(dof)[1]):
        return float(np.sqrt(chi2 / dof))
    return 1.0


def chi2_band(dof: int) -> tuple[float, float]:
    """The middle 99 % of chi-squared.

    Source
    ------
    E. B. Wilson, M. M. Hilferty, Proc. Natl. Acad. Sci. 17, 684 (1931), citation from memory: its cube
    root is nearly normal.
    """
    part = 2.0 / (9.0 * dof)
    low, high = (dof * max(0.0, 1.0 - part + z * np.sqrt(part)) ** 3 for z in (-Z995, Z995))
    return float(low), float(high)


def _scatter_notes(chi2: float, dof: int, growth: float, *, is_scaled: bool) -> tuple[str, ...]:
    if not dof:
        return ("as many quantities as readings: nothing is left to judge the fit by",)
    if is_scaled:
        return ()
    if growth > 1.0:
        return (
            f"the readings miss the fit by {growth:.2f} times their scatter within a dwell: "
            "all standard uncertainties are multiplied by that",
        )
    if chi2 < chi2_band(dof)[0]:
        return (
            "the readings fit better than their scatter within a dwell allows: is it drift or filtering?",
        )
    return ()
