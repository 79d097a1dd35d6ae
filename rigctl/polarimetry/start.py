"""Where to start: every basin of the sum of squares, found on a coarse grid.

It owns the grid of the non-linear unknowns; at each node the linear ones (power, drift, stray light) are
solved exactly, so that no guess of them is ever needed.
"""

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import cast

import numpy as np

from rigctl.optics.forward import unit_light
from rigctl.optics.kernel import Array
from rigctl.optics.parts import DRIFT, POWER, Quantity
from rigctl.polarimetry.problem import Problem

# Coarse enough to be quick, fine enough that 1800 random fits ended as well as fits begun at the truth.
ANGLE_STEP_DEG, RETARDANCE_STEP = 10.0, 0.05
MOST_NODES = 6000
MOST_CELLS = 400_000  # nodes x visits worked on at once
WITHIN = 30.0  # basins worse than the best by this factor are not walked down
MOST_STARTS = 12


@dataclass(frozen=True, slots=True, eq=False)
class _Axis:
    """One non-linear unknown of the grid; a closed axis meets its own beginning."""

    name: str
    nodes: Array
    is_closed: bool


def starts(problem: Problem) -> list[Array]:
    """Starting points, best first, shape (P,) each; the nominal values when no node fits at all."""
    axes = _axes(problem)
    grid = np.meshgrid(*(axis.nodes for axis in axes), indexing="ij")
    columns = {axis.name: nodes.reshape(-1, 1) for axis, nodes in zip(axes, grid, strict=True)}
    shape = tuple(axis.nodes.size for axis in axes)
    chi2, linear = _solve(problem, columns, int(np.prod(shape, dtype=int)))
    picked = _basins(chi2.reshape(shape), axes)
    return [_point(problem, columns, linear, node) for node in picked] or [problem.nominal]


def _axes(problem: Problem) -> list[_Axis]:
    grids = {"angle", "retardance", "cosine"}
    sought = [q for q in problem.fitted if q.kind in grids and q.prior_u is None]
    for widening in (1.0, 1.5, 2.0, 3.0):
        for is_near in (False, True):
            axes = [_axis(problem, q, widening=widening, is_near=is_near) for q in sought]
            if np.prod([axis.nodes.size for axis in axes]) <= MOST_NODES:
                return axes
    return axes


def _axis(problem: Problem, quantity: Quantity, *, widening: float, is_near: bool) -> _Axis:
    if quantity.kind == "angle":
        return _circle(quantity, 180.0, widening * ANGLE_STEP_DEG, is_near=is_near)
    asked = problem.asked.quantities[quantity.name]
    if quantity.kind == "cosine":
        waves = np.linspace(0.0, 0.5, 1 + round(0.5 / (widening * RETARDANCE_STEP)))
        return _Axis(quantity.name, np.cos(2.0 * np.pi * waves), is_closed=False)
    return _circle(asked, 1.0, widening * RETARDANCE_STEP, is_near=is_near)


def _circle(quantity: Quantity, period: float, step: float, *, is_near: bool) -> _Axis:
    reach = 2.0 * (quantity.u or np.inf)
    if is_near and 2.0 * reach < period:
        count = 1 + 2 * int(np.ceil(reach / step))
        return _Axis(quantity.name, quantity.value + np.linspace(-reach, reach, count), is_closed=False)
    nodes = quantity.value + period * np.arange(round(period / step)) / round(period / step)
    return _Axis(quantity.name, nodes, is_closed=True)


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
    return np.where(linear[:, 0] > 0.0, np.maximum(chi2, 0.0), np.inf), linear


def _design(problem: Problem, columns: dict[str, Array]) -> tuple[Array, Array]:
    """Columns power, power x drift, and stray light of each detector; all rows in standard uncertainties."""
    visits, values = problem.visits, problem.values(problem.nominal)
    nodes = cast("Mapping[str, float]", {**values, **columns})  # columns broadcast as numbers do
    seen = unit_light(problem.train, visits, nodes)
    detectors = problem.train.detectors
    blocks = []
    for k, detector in enumerate(detectors):
        light = np.atleast_2d(seen[detector.name])
        steady, drifting = light * (1.0 + values[DRIFT] * visits.centred_h), light * visits.centred_h
        stray = np.zeros((len(detectors), *light.shape))
        stray[k] = 1.0
        block = np.stack([steady, drifting, *stray], axis=-1)
        blocks.append(block * problem.weight[detector.name][:, None])
    target = np.concatenate([problem.level_w[d.name] * problem.weight[d.name] for d in detectors])
    return np.concatenate(blocks, axis=1), target


def _linear_knowledge(problem: Problem) -> tuple[Array, Array]:
    """What is known of the linear columns beforehand: centre and precision."""
    quantities = problem.train.quantities
    brightest_w = max(float(np.max(np.abs(level), initial=0.0)) for level in problem.level_w.values()) or 1.0
    drift_u = brightest_w * (_u(quantities[DRIFT], 1.0) or 1e-6)
    strays = [quantities[d.stray_light] for d in problem.train.detectors]
    bare = [(q.value, _u(q, np.inf) or 1e-6 * brightest_w) for q in (quantities[POWER], *strays)]
    pairs = np.array([bare[0], (0.0, drift_u), *bare[1:]])
    return pairs[:, 0], pairs[:, 1] ** -2.0


def _u(quantity: Quantity, if_free: float) -> float:
    """Its prior, `if_free` when nothing is known, 0 when it is exact."""
    return (quantity.prior_u or if_free) if quantity.is_fitted else 0.0


def _basins(chi2: Array, axes: list[_Axis]) -> list[int]:
    """Nodes no worse than all their neighbours, best first."""
    lowest = chi2
    for k, axis in enumerate(axes):
        lowest = np.minimum.reduce([lowest, *_neighbours(lowest, k, is_closed=axis.is_closed)])
    nodes = np.flatnonzero((chi2 <= lowest) & np.isfinite(chi2))
    order = nodes[np.argsort(chi2.flat[nodes], kind="stable")]
    return [int(node) for node in order if chi2.flat[node] <= WITHIN * chi2.flat[order[0]]][:MOST_STARTS]


def _neighbours(chi2: Array, k: int, *, is_closed: bool) -> Iterator[Array]:
    for shift, edge in ((1, 0), (-1, -1)):
        moved = np.roll(chi2, shift, axis=k)
        if not is_closed:
            moved[(slice(None),) * k + (edge,)] = np.inf
        yield moved


def _point(problem: Problem, columns: dict[str, Array], linear: Array, node: int) -> Array:
    power, power_drift, *stray = map(float, linear[node])
    names = [POWER, DRIFT, *(d.stray_light for d in problem.train.detectors)]
    solved = dict(zip(names, (power, problem.train.quantities[DRIFT].value + power_drift / power, *stray), strict=True))
    solved |= {name: float(nodes[node, 0]) for name, nodes in columns.items()}
    return np.array([solved.get(q.name, q.value) for q in problem.fitted])
