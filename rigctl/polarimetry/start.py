"""Where to start: every basin of the sum of squares, found on a coarse grid.

It owns the grid of the non-linear unknowns; at each node the linear ones (power, drift, stray light) are
solved exactly, so that no guess of them is ever needed.
"""

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import cast

import numpy as np

from rigctl.optics.forward import level_masks, unit_light
from rigctl.optics.kernel import Array
from rigctl.optics.parts import DRIFT, POWER, Quantity, base_of
from rigctl.optics.visits import groups
from rigctl.polarimetry.problem import Problem

# Coarse enough to be quick, fine enough that 1800 random fits ended as well as fits begun at the truth.
RETARDANCE_STEP = 0.05
PERIODS = {"angle": (180.0, 10.0), "retardance": (1.0, RETARDANCE_STEP)}  # and step
GRIDS = {*PERIODS, "cosine"}
MOST_NODES = 6000
MOST_VISITS = 400
MOST_CELLS = 400_000  # nodes x visits worked on at once
WITHIN = 30.0  # basins worse than the best by this factor are not walked down
MOST_STARTS = 12
TIED = 1e-9  # relative: where a plate retards nothing its angle does not matter


@dataclass(frozen=True, slots=True, eq=False)
class _Axis:
    """One non-linear unknown of the grid, at all its levels alike; a closed axis meets its own beginning."""

    names: tuple[str, ...]
    nodes: Array
    is_closed: bool


def starts(problem: Problem) -> list[Array]:
    """Starting points, best first, shape (P,) each; the nominal values when no node fits at all."""
    problem = thinned(problem)
    axes = _axes(problem)
    grid = np.meshgrid(*(axis.nodes for axis in axes), indexing="ij")
    columns = {n: nodes.reshape(-1, 1) for axis, nodes in zip(axes, grid, strict=True) for n in axis.names}
    shape = tuple(axis.nodes.size for axis in axes)
    chi2, linear = _solve(problem, columns, int(np.prod(shape, dtype=int)))
    picked = _basins(chi2.reshape(shape), axes)
    points = [({name: float(nodes[node, 0]) for name, nodes in columns.items()}, linear[node]) for node in picked]
    return [_point(problem, *_apart(problem, axes, point)) for point in points] or [problem.nominal]


def thinned(problem: Problem) -> Problem:
    """The problem with at most so many visits, of every kind some: a start needs no more."""
    visits = problem.visits
    if visits.count <= MOST_VISITS:
        return problem
    kinds = [visits.is_open, *visits.present.values(), *(levels.index for levels in visits.levels.values())]
    group = groups(kinds, visits.count)
    shuffled = np.random.default_rng(20).permutation(visits.count)  # a stride could fall in step with the angles
    each = max(1, MOST_VISITS // (int(np.max(group)) + 1))
    return problem.rows_at(np.sort(np.concatenate([shuffled[group[shuffled] == k][:each] for k in np.unique(group)])))


def _apart(
    problem: Problem, axes: list[_Axis], point: tuple[dict[str, float], Array]
) -> tuple[dict[str, float], Array]:
    """The same point with every level of an unknown put where it fits best, one after another."""
    here, linear = point
    for axis in axes:
        for name in axis.names if len(axis.names) > 1 else ():
            columns = {n: np.full((axis.nodes.size, 1), value) for n, value in here.items()}
            chi2, linears = _solve(problem, {**columns, name: axis.nodes[:, None]}, axis.nodes.size)
            best = int(np.argmin(chi2))
            here, linear = {**here, name: float(axis.nodes[best])}, linears[best]
    return here, linear


def _axes(problem: Problem) -> list[_Axis]:
    sought: dict[str, list[Quantity]] = {}
    for quantity in problem.fitted:
        if quantity.kind in GRIDS and quantity.prior_u is None:
            sought.setdefault(base_of(quantity.name), []).append(quantity)
    for widening in (1.0, 1.5, 2.0, 3.0):
        for is_near in (False, True):
            axes = [_axis(problem, levels, widening=widening, is_near=is_near) for levels in sought.values()]
            if np.prod([axis.nodes.size for axis in axes]) <= MOST_NODES:
                return axes
    return axes


def _axis(problem: Problem, levels: list[Quantity], *, widening: float, is_near: bool) -> _Axis:
    names, quantity = tuple(level.name for level in levels), levels[0]
    if quantity.kind == "cosine":
        waves = np.linspace(0.0, 0.5, 1 + round(0.5 / (widening * RETARDANCE_STEP)))
        return _Axis(names, np.cos(2.0 * np.pi * waves), is_closed=False)
    period, step = PERIODS[quantity.kind]
    asked = problem.asked.quantities[quantity.name]
    return _circle(names, asked, period, widening * step, is_near=is_near)


def _circle(names: tuple[str, ...], quantity: Quantity, period: float, step: float, *, is_near: bool) -> _Axis:
    reach = 2.0 * (quantity.u or np.inf)
    if is_near and 2.0 * reach < period:
        count = 1 + 2 * int(np.ceil(reach / step))
        return _Axis(names, quantity.value + np.linspace(-reach, reach, count), is_closed=False)
    count = 2 * round(period / step / 2.0)
    nodes = quantity.value + period * (np.arange(count) / count - 0.5)  # of several orders the nearest
    return _Axis(names, nodes, is_closed=True)


def _solve(problem: Problem, columns: dict[str, Array], count: int) -> tuple[Array, Array]:
    """Chi-squared of every node, inf where the light would be negative, and its linear solution."""
    per_chunk = max(1, MOST_CELLS // max(1, problem.visits.count))
    parts = [
        _solve_chunk(problem, {name: nodes[i : i + per_chunk] for name, nodes in columns.items()})
        for i in range(0, count, per_chunk)
    ]
    return np.concatenate([chi2 for chi2, _ in parts]), np.concatenate([linear for _, linear in parts])


def _solve_chunk(problem: Problem, columns: dict[str, Array]) -> tuple[Array, Array]:
    design, target = _design(problem, columns)
    normal = np.einsum("gnl,gnm->glm", design, design)
    right = np.einsum("gnl,n->gl", design, target)
    centre, precision = _linear_knowledge(problem)
    size = centre.size
    normal[:, range(size), range(size)] += precision + 1e-12 * np.max(normal, axis=(1, 2), initial=0.0)[:, None]
    right += precision * centre
    linear = np.linalg.solve(normal, right[..., None])[..., 0]
    chi2 = target @ target + precision @ centre**2 - np.einsum("gl,gl->g", linear, right)
    powers = linear[:, [base_of(q.name) == POWER for q in _linear(problem)]]
    is_light = np.all(powers >= 0.0, axis=1) & np.any(powers > 0.0, axis=1)
    return np.where(is_light, np.maximum(chi2, 0.0), np.inf), linear


def _linear(problem: Problem) -> list[Quantity]:
    """The quantities in which the readings are linear at a node, exact ones among them: power, drift, stray light."""
    train = problem.train
    bases = [POWER, DRIFT, *(d.stray_light for d in train.detectors)]
    return [q for base in bases for q in train.levels_of(base) or (train.quantities[base],)]


def _design(problem: Problem, columns: dict[str, Array]) -> tuple[Array, Array]:
    """A column for each linear quantity, power x drift for the drift; all rows in standard uncertainties."""
    visits, train, linear = problem.visits, problem.train, _linear(problem)
    nodes = cast("Mapping[str, float]", {**problem.values(problem.nominal), **columns})  # columns broadcast
    masks = level_masks(train, visits)
    light, blocks = unit_light(train, visits, nodes), []
    drift = train.quantities[DRIFT].value
    shape = (max((len(nodes) for nodes in columns.values()), default=1), visits.count)
    for detector in train.detectors:
        seen = np.broadcast_to(light[detector.name], shape)
        parts = {
            POWER: seen * (1.0 + drift * visits.centred_h),
            DRIFT: seen * visits.centred_h,
            detector.stray_light: np.ones_like(seen),
        }
        nothing = np.zeros_like(seen)
        block = [parts.get(base_of(q.name), nothing) * masks.get(q.name, ("", 1.0))[1] for q in linear]
        blocks.append(np.stack(block, axis=-1) * problem.weight[detector.name][:, None])
    target = np.concatenate([problem.level_w[d.name] * problem.weight[d.name] for d in train.detectors])
    return np.concatenate(blocks, axis=1), target


def _linear_knowledge(problem: Problem) -> tuple[Array, Array]:
    """What is known of the linear columns beforehand: centre and precision."""
    brightest_w = max(float(np.max(np.abs(level), initial=0.0)) for level in problem.level_w.values()) or 1.0
    pairs = [_known(q, brightest_w) for q in _linear(problem)]
    centre, u = np.array(pairs).T
    return centre, u**-2.0


def _known(quantity: Quantity, brightest_w: float) -> tuple[float, float]:
    """Centre and standard uncertainty of the column; the one of the drift is a power."""
    if quantity.kind == "drift":
        return 0.0, brightest_w * (_u(quantity, 1.0) or 1e-6)
    return quantity.value, _u(quantity, np.inf) or 1e-6 * brightest_w


def _u(quantity: Quantity, if_free: float) -> float:
    """Its prior, `if_free` when nothing is known, 0 when it is exact."""
    return (quantity.prior_u or if_free) if quantity.is_fitted else 0.0


def _basins(chi2: Array, axes: list[_Axis]) -> list[int]:
    """Nodes no worse than all their neighbours, of a plain the first, best first."""
    lowest, first = chi2, np.ones(chi2.shape, dtype=bool)
    for k, axis in enumerate(axes):
        lowest = np.minimum.reduce([lowest, *_neighbours(lowest, k, is_closed=axis.is_closed)])
        before = next(_neighbours(chi2, k, is_closed=False))
        first &= ~np.isclose(before, chi2, rtol=TIED, atol=0.0)
    nodes = np.flatnonzero((chi2 <= lowest) & np.isfinite(chi2) & first)
    order = nodes[np.argsort(chi2.flat[nodes], kind="stable")]
    return [int(node) for node in order if chi2.flat[node] <= WITHIN * chi2.flat[order[0]]][:MOST_STARTS]


def _neighbours(chi2: Array, k: int, *, is_closed: bool) -> Iterator[Array]:
    for shift, edge in ((1, 0), (-1, -1)):
        moved = np.roll(chi2, shift, axis=k)
        if not is_closed:
            moved[(slice(None),) * k + (edge,)] = np.inf
        yield moved


def _point(problem: Problem, nodes: dict[str, float], linear: Array) -> Array:
    amounts = {q.name: float(amount) for q, amount in zip(_linear(problem), linear, strict=True)}
    powers = [amount for name, amount in amounts.items() if base_of(name) == POWER and amount > 0.0]
    solved = {**amounts, **nodes}
    for name in (name for name in amounts if base_of(name) == DRIFT):
        solved[name] = problem.train.quantities[DRIFT].value + amounts[name] / float(np.mean(powers))
    return np.array([solved.get(q.name, q.value) for q in problem.fitted])
