"""The angles of one axis of a sweep, from the ways in which people write them.

It owns the arithmetic of turns and ranges; it knows no mount.
"""

import math
from collections.abc import Sequence

from rigctl.files.leaves import exactly_one, wrong
from rigctl.quantities import format_quantity

MOST_ANGLES = 100_000
"""At one second a visit more than a day; a step that asks for more is a slip."""
FINEST_DEG = 1e-9
"""Angles are rounded to this, so that 0.1 deg times 3 is 0.3 deg."""
_GRID = 1000
"""Steps are proposed in thousandths of a degree."""


def angles_of(
    *,
    turn: float | None,
    values: Sequence[float] | None,
    span: tuple[float, float] | None,
    step: float | None,
    start: float | None,
) -> tuple[float, ...]:
    """Return the angles in the order of the visits, deg.

    A turn leaves its end out, a range holds both ends; a step must divide either.
    """
    given = [name for name, value in (("turn", turn), ("values", values), ("range", span)) if value is not None]
    exactly_one(("turn", "values", "range"), given)
    if start is not None and turn is None:
        raise wrong("'start' goes with 'turn' alone", key="start")
    if values is not None:
        if step is not None:
            raise wrong("'step' goes with 'turn' or 'range', not with 'values'", key="step")
        return tuple(values)
    if step is None:
        raise wrong("the key 'step' is missing", expected="a step such as 5 deg")
    if span is not None:
        return _ladder(span[0], _steps(span[1] - span[0], step, what="range") + 1, step)
    return _ladder(start or 0.0, _steps(360.0 * (turn or 0.0), step, what="turn"), step)


def _ladder(start: float, count: int, step: float) -> tuple[float, ...]:
    digits = round(-math.log10(FINEST_DEG))
    return tuple(round(start + i * step, digits) for i in range(count))


def _steps(length: float, step: float, *, what: str) -> int:
    """How many steps make up a length, both in deg; refuses a step that does not divide it."""
    written = format_quantity(step, "angle")
    if not step > 0:
        raise wrong(f"a step of {written} leads nowhere", expected="a step above zero", key="step")
    if length / step > MOST_ANGLES + 0.5:
        what = f"steps of {written} make more than {MOST_ANGLES} angles"
        raise wrong(what, expected="larger steps", key="step")
    count = round(length / step)
    if count < 1 or abs(count * step - length) > FINEST_DEG * count:
        near = " or ".join(format_quantity(s, "angle") for s in nearest_steps(length, step))
        whole = format_quantity(length, "angle")
        raise wrong(f"steps of {written} do not divide the {what} of {whole}", expected=f"steps of {near}", key="step")
    return count


def nearest_steps(length: float, step: float) -> tuple[float, ...]:
    """Return the steps next below and above that divide a length, in short numbers where there are such."""
    ticks = round(length * _GRID)
    wanted = step * _GRID
    if abs(ticks - length * _GRID) > 1e-6 or ticks > 360 * _GRID * 100:
        count = length / step
        return tuple(length / n for n in (math.ceil(count), math.floor(count)) if n >= 1)
    divisors = {d for n in range(1, math.isqrt(ticks) + 1) if ticks % n == 0 for d in (n, ticks // n)}
    below = [d for d in divisors if d <= wanted]
    above = [d for d in divisors if d > wanted]
    return tuple(d / _GRID for d in (*([max(below)] if below else []), *([min(above)] if above else [])))
