"""What sources and controllers said: beside each visit, and as a log of the whole run.

It owns how a quantity of a journal (`temperature_c`) is called and in what units it stands in the run file.
"""

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from rigctl.record.layout import StepLayout
from rigctl.record.names import clean_name, free_names
from rigctl.record.records import Visit
from rigctl.record.run import Run
from rigctl.record.variables import Array, Frame, Variable

_UNITS = {"a": "A", "v": "V", "c": "degC", "ohm": "ohm", "w": "W", "deg": "deg", "k": "K"}


@dataclass(frozen=True, slots=True)
class Log:
    """One quantity of one role over the run; instants in s since the start."""

    name: str
    role: str
    quantity: str
    units: str
    times_s: Array
    values: Array


def quantity_and_units(key: str) -> tuple[str, str]:
    """Return `temperature` and `degC` for `temperature_c`; a key without known units as it is, in units of 1."""
    quantity, _, suffix = key.rpartition("_")
    return (quantity, _UNITS[suffix]) if quantity and suffix in _UNITS else (key, "1")


def condition_variables(
    frame: Frame, step: StepLayout, visits: Sequence[Visit], taken: Sequence[str]
) -> tuple[Variable, ...]:
    """Return a variable for each quantity that a role said at the visits; what an axis reads back is left to it."""
    keys = [key for key in _keys(visits) if not _is_axis(step, *key)]
    names = free_names([_name(role, key) for role, key in keys], taken=taken)
    return tuple(_variable(frame, visits, name, key) for name, key in zip(names, keys, strict=True))


def logs(run: Run) -> tuple[Log, ...]:
    """Return every quantity that was ever said, at visits or between them, each in the order of time."""
    said: dict[tuple[str, str], list[tuple[float, float]]] = {}
    for instant_s, role, values in _sayings(run):
        for key, value in values.items():
            said.setdefault((role, key), []).append((instant_s, np.nan if value is None else value))
    names = free_names([_name(role, key) for role, key in said])
    return tuple(_log(name, role, key, said[role, key]) for name, (role, key) in zip(names, said, strict=True))


def said_roles(run: Run) -> tuple[str, ...]:
    """Return the roles that ever told of a condition."""
    return tuple(dict.fromkeys(role for _, role, _ in _sayings(run)))


def _sayings(run: Run) -> Iterator[tuple[float, str, Mapping[str, float | None]]]:
    for record in run.of_kind("reading"):
        yield record["t"], record["role"], record["values"]
    for visit in run.attempts:
        for role, values in visit.conditions.items():
            yield visit.ended_s, role, values


def _log(name: str, role: str, key: str, points: list[tuple[float, float]]) -> Log:
    times_s, values = np.array(sorted(points, key=lambda point: point[0]), float).T
    return Log(name, role, *quantity_and_units(key), times_s, values)


def _keys(visits: Sequence[Visit]) -> list[tuple[str, str]]:
    keys = {(role, key): None for visit in visits for role, values in visit.conditions.items() for key in values}
    return list(keys)


def _is_axis(step: StepLayout, role: str, key: str) -> bool:
    return any(axis.role == role and axis.units == quantity_and_units(key)[1] for axis in step.axes)


def _name(role: str, key: str) -> str:
    return clean_name(f"{role} {quantity_and_units(key)[0]}")


def _variable(frame: Frame, visits: Sequence[Visit], name: str, key: tuple[str, str]) -> Variable:
    role, written = key
    quantity, units = quantity_and_units(written)
    values = frame.fill([visit.conditions.get(role, {}).get(written, np.nan) for visit in visits])
    return Variable(name, frame.dims, values, {"units": units, "long_name": f"{role}, {quantity} read at the visit"})
