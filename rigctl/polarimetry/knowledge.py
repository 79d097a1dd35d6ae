"""What a sweep does not tell: blind combinations, poorly separated unknowns, and what would cure them.

It owns the judgement from the slopes alone; it never looks at a residual. A direction is blind when the
sweep tells less about it than any practitioner knew before.
"""

from collections.abc import Sequence

import numpy as np

from rigctl.optics.kernel import Array
from rigctl.polarimetry.coordinates import estimate_of, to_people
from rigctl.polarimetry.descent import covariance
from rigctl.polarimetry.problem import Problem
from rigctl.polarimetry.remedies import Remedy, remedies
from rigctl.polarimetry.results import Coupling, Refusal

SHARE = 0.1  # least part of a quantity in a blind direction that counts
BLURRED = 30.0  # times worse than with the others known
CLEARLY = 3.0  # times better known


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


def _first_cure(problem: Problem, z: Array, unknown: Sequence[str], members: Sequence[str]) -> Remedy | None:
    """The first remedy, the most practical first, after which none of the unknowns is blind."""
    for remedy in remedies(problem.holding(()), z, [n for n in members if n not in unknown[:1]]):
        shares = dict(zip(remedy.problem.names, np.linalg.norm(blind(remedy.problem, z), axis=0), strict=True))
        if all(shares[name] <= SHARE for name in unknown if name in shares):
            return remedy
    return None


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
    """The unknowns that are found, but far worse than if the others were known, each with its remedy."""
    matrix = covariance(slopes)
    u, lengths = np.sqrt(np.diag(matrix)), np.linalg.norm(slopes, axis=0)
    correlation = np.abs(matrix) / np.outer(u, u) - np.eye(u.size)
    found = []
    for k, quantity in enumerate(problem.fitted):
        blur = float(u[k] * lengths[k])
        if quantity.is_unknown and quantity.name not in problem.held and blur > BLURRED:
            readable_u = _readable_u(problem, z, k, float(u[k]))
            other = problem.names[int(np.argmax(correlation[k]))]
            sentence, better_u = _parting(problem, z, quantity.name, other, readable_u)
            found.append(Coupling(quantity.name, readable_u, readable_u / blur, other, sentence, better_u))
    return tuple(found)


def _parting(problem: Problem, z: Array, name: str, other: str, u: float) -> tuple[str, float | None]:
    """The first remedy that makes an unknown clearly better known, and its uncertainty then."""
    for remedy in remedies(problem, z, [other]):
        better_u = _u_by_name(remedy.problem, z, [name])[name]
        if better_u < u / CLEARLY:
            return remedy.sentence, better_u
    return "", None
