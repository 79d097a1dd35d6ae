"""What a sweep does not tell: blind combinations, poorly separated unknowns, and what would cure them.

It owns the judgement from the slopes alone; it never looks at a residual. A direction is blind when the
sweep tells less about it than any practitioner knew before.
"""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np

from rigctl.optics.kernel import Array
from rigctl.optics.visits import Visits
from rigctl.polarimetry.coordinates import estimate_of, to_people
from rigctl.polarimetry.descent import covariance
from rigctl.polarimetry.problem import Problem
from rigctl.polarimetry.results import Coupling, Refusal

SHARE = 0.1  # least part of a quantity in a blind direction that counts
BLURRED = 30.0  # times worse than with the others known
DARK_READINGS = 10
TURN_STEP_DEG = 10.0
KNOWN_WELL = 1e-3  # of what is plausible


@dataclass(frozen=True, slots=True)
class _Remedy:
    """Something to do, and the problem once it is done."""

    sentence: str
    problem: Problem


def blind(problem: Problem, z: Array) -> Array:
    """Directions that the sweep does not see.

    Returns
    -------
    Shape (k, P): orthogonal unit rows in quantities scaled by what is plausible.
    """
    bare = problem.holding(())
    _, slopes = bare.rows(z)
    triangle = np.linalg.qr(slopes * bare.widths(z), mode="r")
    _, s, Vt = np.linalg.svd(triangle)
    seen = int(np.count_nonzero(s >= 1.0))
    rows: Array = Vt[seen:]
    return rows


def guarded(problem: Problem, z: Array) -> Problem:
    """The problem with every quantity held that takes part in a blind direction."""
    shares = np.linalg.norm(blind(problem, z), axis=0)
    return problem.holding(tuple(n for n, share in zip(problem.names, shares, strict=True) if share > SHARE))


def refusals(problem: Problem, z: Array) -> tuple[Refusal, ...]:
    """The unknowns among the quantities held, each combination with its remedy."""
    found = (_refusal(problem, z, _members(problem, row)) for row in _echelon(blind(problem, z)))
    return tuple(refusal for refusal in found if refusal.names)


def _refusal(problem: Problem, z: Array, members: Sequence[str]) -> Refusal:
    unknown = tuple(n for n in members if problem.asked.quantities[n].is_unknown)
    if len(members) == 1:
        why = f"the sweep does not see {members[0]}"
    else:
        why = f"the sweep sees only a combination of {' and '.join(members)}"
    remedy = _first_cure(problem, z, unknown, members) if unknown else None
    if remedy is None:
        return Refusal(unknown, why, "", {})
    return Refusal(unknown, why, remedy.sentence, _u_by_name(remedy.problem, z, unknown))


def _members(problem: Problem, row: Array) -> tuple[str, ...]:
    return tuple(n for n, part in zip(problem.names, row, strict=True) if abs(part) > SHARE)


def _echelon(rows: Array) -> Array:
    """The same directions, each naming as few quantities as can be; largest part 1."""
    rows = rows.copy()
    taken: list[int] = []
    for k in range(len(rows)):
        free = np.abs(rows[k])
        free[taken] = 0.0
        pivot = int(np.argmax(free))
        rows[k] /= rows[k, pivot]
        others = np.arange(len(rows)) != k
        rows[others] -= np.outer(rows[others, pivot], rows[k])
        taken.append(pivot)
    return rows


def _first_cure(problem: Problem, z: Array, unknown: Sequence[str], members: Sequence[str]) -> _Remedy | None:
    """The first remedy, the most practical first, after which none of the unknowns is blind."""
    for remedy in _remedies(problem.holding(()), z, [n for n in members if n not in unknown[:1]]):
        shares = dict(zip(remedy.problem.names, np.linalg.norm(blind(remedy.problem, z), axis=0), strict=True))
        if all(shares[name] <= SHARE for name in unknown if name in shares):
            return remedy
    return None


def _remedies(problem: Problem, z: Array, others: Sequence[str]) -> Iterator[_Remedy]:
    visits = problem.visits
    if not visits.has_dark:
        sentence = f"Add {DARK_READINGS} readings with the beam blocked."
        yield _Remedy(sentence, problem.extended(_dark(visits)))
    for mount, angles in visits.angle_deg.items():
        if not np.ptp(angles):
            yield _Remedy(f"Add a sweep over a full turn of {mount}.", problem.extended(_turn(visits, mount)))
        elif len(visits.angle_deg) > 1:
            for angle_deg in (45.0, 90.0):
                sentence = f"Repeat the sweep with {mount} {angle_deg:g} deg further."
                yield _Remedy(sentence, problem.extended(_shifted(visits, mount, angle_deg)))
    widths = dict(zip(problem.names, problem.widths(z), strict=True))
    for name in others:
        sentence = f"Measure {name} apart and state it with its tolerance in the recipe."
        yield _Remedy(sentence, problem.told(name, KNOWN_WELL * widths[name]))


def _dark(visits: Visits) -> Visits:
    angles = {mount: np.full(DARK_READINGS, column[0]) for mount, column in visits.angle_deg.items()}
    middle_h = np.full(DARK_READINGS, float(np.median(visits.time_h)))
    return Visits(angles, np.zeros(DARK_READINGS, dtype=bool), middle_h)


def _turn(visits: Visits, mount: str) -> Visits:
    turn = np.arange(0.0, 360.0, TURN_STEP_DEG)
    angles = {name: np.full(turn.size, column[0]) for name, column in visits.angle_deg.items()}
    middle_h = np.full(turn.size, float(np.median(visits.time_h)))
    return Visits({**angles, mount: turn}, np.ones(turn.size, dtype=bool), middle_h)


def _shifted(visits: Visits, mount: str, angle_deg: float) -> Visits:
    return Visits({**visits.angle_deg, mount: visits.angle_deg[mount] + angle_deg}, visits.is_open, visits.time_h)


def _u_by_name(problem: Problem, z: Array, names: Sequence[str]) -> dict[str, float]:
    """Standard uncertainties as people read them."""
    _, slopes = guarded(problem, z).rows(z)
    u = np.sqrt(np.diag(covariance(slopes)))
    return {n: _readable_u(problem, z, problem.names.index(n), float(u[problem.names.index(n)])) for n in names}


def _readable_u(problem: Problem, z: Array, k: int, u: float) -> float:
    form, fitted = problem.fitted[k].kind, float(z[k])
    value, _ = to_people(form, fitted)
    return estimate_of(problem.asked.quantities[problem.names[k]], form, value=value, fitted=fitted, u=u).u


def couplings(problem: Problem, z: Array, slopes: Array) -> tuple[Coupling, ...]:
    """The unknowns that are found, but far worse than if the others were known."""
    matrix = covariance(slopes)
    u, lengths = np.sqrt(np.diag(matrix)), np.linalg.norm(slopes, axis=0)
    correlation = np.abs(matrix) / np.outer(u, u) - np.eye(u.size)
    found = []
    for k, quantity in enumerate(problem.fitted):
        blur = float(u[k] * lengths[k])
        if quantity.is_unknown and quantity.name not in problem.held and blur > BLURRED:
            readable_u = _readable_u(problem, z, k, float(u[k]))
            other = problem.names[int(np.argmax(correlation[k]))]
            found.append(Coupling(quantity.name, readable_u, readable_u / blur, other))
    return tuple(found)
