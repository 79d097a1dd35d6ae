"""The values of one axis of a sweep, from the ways in which people write them.

It owns the arithmetic of turns, ranges and ways back; it knows no instrument.
"""

import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass

from rigctl.files.leaves import exactly_one, wrong
from rigctl.files.recipe import AxisKind
from rigctl.quantities import format_quantity

MOST_VALUES = 100_000
"""At one second a visit more than a day; a step that asks for more is a slip."""
QUANTITY: dict[AxisKind, str] = {
    "angle": "angle",
    "temperature": "temperature",
    "current": "current",
    "repeat": "count",
}
"""Kind of quantity of an axis' values."""
STEP_QUANTITY: dict[AxisKind, str] = {**QUANTITY, "temperature": "temperature difference"}
"""Kind of quantity between two values of an axis."""


@dataclass(frozen=True, slots=True)
class Grid:
    """How finely a kind of axis is set, in its base unit.

    Values are rounded to `finest`, so that 0.1 deg times 3 is 0.3 deg; steps are proposed in parts of `proposed`.
    """

    finest: float
    proposed: float


GRIDS: dict[AxisKind, Grid] = {
    "angle": Grid(1e-9, 1e-3),
    "temperature": Grid(1e-9, 1e-3),
    "current": Grid(1e-12, 1e-6),
    "repeat": Grid(1.0, 1.0),
}


def values_of(
    kind: AxisKind,
    *,
    turn: float | None = None,
    values: Sequence[float] | None = None,
    span: tuple[float, float] | None = None,
    step: float | None = None,
    start: float | None = None,
) -> tuple[float, ...]:
    """Return values in the order of the visits, in the base unit of their kind.

    A turn leaves its end out, a range holds both ends; a step must divide either.
    """
    given = [name for name, value in (("turn", turn), ("values", values), ("range", span)) if value is not None]
    exactly_one(("turn", "values", "range") if kind == "angle" else ("values", "range"), given)
    if start is not None and turn is None:
        raise wrong("'start' goes with 'turn' alone", key="start")
    if values is not None:
        if step is not None:
            raise wrong("'step' goes with 'turn' or 'range', not with 'values'", key="step")
        return tuple(values)
    if step is None:
        example = {"angle": "5 deg", "temperature": "1 K", "current": "1 mA"}.get(kind, "1")
        raise wrong("the key 'step' is missing", expected=f"a step such as {example}")
    if span is not None:
        return _ladder(span[0], _steps(span[1] - span[0], step, kind, what="range") + 1, step, kind)
    return _ladder(start or 0.0, _steps(360.0 * (turn or 0.0), step, kind, what="turn"), step, kind)


def there_and_back(values: Sequence[float]) -> tuple[float, ...]:
    """Return values and the same way back; the point of return is visited once."""
    return (*values, *reversed(values[:-1]))


def joined(pieces: Iterable[Sequence[float]]) -> tuple[float, ...]:
    """Return pieces one after another; where one begins at the end of that before, the value is visited once."""
    values: list[float] = []
    for piece in pieces:
        values += piece[1:] if values and piece[0] == values[-1] else piece
    return tuple(values)


def _ladder(start: float, count: int, step: float, kind: AxisKind) -> tuple[float, ...]:
    digits = round(-math.log10(GRIDS[kind].finest))
    return tuple(round(start + i * step, digits) for i in range(count))


def _steps(length: float, step: float, kind: AxisKind, *, what: str) -> int:
    """How many steps make up a length, both in the base unit; refuses a step that does not divide it."""
    quantity = STEP_QUANTITY[kind]
    written = format_quantity(step, quantity)
    if not step > 0:
        raise wrong(f"a step of {written} leads nowhere", expected="a step above zero", key="step")
    if length / step > MOST_VALUES + 0.5:
        plural = "angles" if kind == "angle" else "values"
        what = f"steps of {written} make more than {MOST_VALUES} {plural}"
        raise wrong(what, expected="larger steps", key="step")
    count = round(length / step)
    if count < 1 or abs(count * step - length) > GRIDS[kind].finest * count:
        near = " or ".join(format_quantity(s, quantity) for s in nearest_steps(length, step, kind))
        whole = format_quantity(length, quantity)
        raise wrong(f"steps of {written} do not divide the {what} of {whole}", expected=f"steps of {near}", key="step")
    return count


def nearest_steps(length: float, step: float, kind: AxisKind) -> tuple[float, ...]:
    """Return the steps next below and above that divide a length, in short numbers where there are such."""
    grid = round(1 / GRIDS[kind].proposed)
    ticks = round(length * grid)
    wanted = step * grid
    if abs(ticks - length * grid) > 1e-6 or ticks > 360 * 1000 * 100:
        count = length / step
        return tuple(length / n for n in (math.ceil(count), math.floor(count)) if n >= 1)
    divisors = {d for n in range(1, math.isqrt(ticks) + 1) if ticks % n == 0 for d in (n, ticks // n)}
    below = [d for d in divisors if d <= wanted]
    above = [d for d in divisors if d > wanted]
    return tuple(d / grid for d in (*([max(below)] if below else []), *([min(above)] if above else [])))
