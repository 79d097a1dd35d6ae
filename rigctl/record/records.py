"""The records of a journal as values: visits, darks, and what is accepted at all.

It owns the names of the keys. Every record is checked before it is written, so that a view can always be
built from what the journal holds.
"""

import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from operator import lt
from typing import Any

from rigctl.errors import RecordError
from rigctl.interfaces import Dwell, Flag
from rigctl.record.layout import Header

KEYS = {
    "header": ("uuid", "start"),
    "identity": ("instrument", "role", "identity"),
    "settings": ("instrument", "values"),
    "calibration": ("instrument", "values"),
    "event": ("t", "text", "level"),
    "visit": ("step", "visit", "index", "attempt", "start", "t_begin", "t_end", "asked", "status"),
    "dark": ("step", "when", "how", "t_begin", "t_end", "detectors"),
    "reading": ("t", "role", "values"),
    "end": ("t", "status", "code", "why"),
}
"""The kinds of record, and what each must say."""
VISIT_STATUSES = ("ok", "saturated", "failed")
END_STATUSES = ("complete", "stopped", "failed")
DARK_WHAT = ("dark", "background", "zero")
DARK_WHEN = ("before", "during", "after")
DARK_HOW = ("by hand", "by shutter", "source off")


@dataclass(frozen=True, slots=True)
class Visit:
    """One attempt at a visit; instants in s since the start, asked and read by role in the units of its axis.

    `number` is the visit's place in the plan, `index` that in the step's grid, `start` says how often the run had
    been started. A role that was not read is missing or NaN. `conditions` are what sources and controllers said
    meanwhile, by role and quantity; `present` tells which of the elements that move stood in the beam, and
    `is_confirmed` whether anybody saw to that.
    """

    step: str
    number: int
    index: tuple[int, ...]
    attempt: int
    start: int
    began_s: float
    ended_s: float
    asked: Mapping[str, float]
    read: Mapping[str, float]
    dwells: Mapping[str, Dwell]
    status: str
    why: str
    conditions: Mapping[str, Mapping[str, float]] = field(default_factory=dict)
    present: Mapping[str, bool] = field(default_factory=dict)
    is_confirmed: bool = True


@dataclass(frozen=True, slots=True)
class Dark:
    """Readings of every detector without the light.

    `what` is `dark` (the beam blocked at the source), `background` (the source off) or `zero` (detectors capped).
    """

    step: str
    when: str
    how: str
    began_s: float
    ended_s: float
    dwells: Mapping[str, Dwell]
    what: str = "dark"


def dwell_record(dwell: Dwell) -> dict[str, Any]:
    """Return a dwell as it stands under `detectors` in the record of a visit or a dark."""
    return {
        "levels_w": list(dwell.levels_w),
        "flags": int(dwell.flags),
        "range_w": dwell.range_w,
        "t_begin": dwell.began_s,
        "t_end": dwell.ended_s,
    }


def parse_visit(record: Mapping[str, Any]) -> Visit:
    """Return the visit of a record."""
    return Visit(
        step=record["step"],
        number=record["visit"],
        index=tuple(record["index"]),
        attempt=record["attempt"],
        start=record["start"],
        began_s=_real(record["t_begin"]),
        ended_s=_real(record["t_end"]),
        asked=_reals(record["asked"]),
        read=_reals(record.get("read", {})),
        dwells=_dwells(record.get("detectors", {})),
        status=record["status"],
        why=record.get("why", ""),
        conditions={role: _reals(values) for role, values in record.get("conditions", {}).items()},
        present=record.get("present", {}),
        is_confirmed=record.get("confirmed", True),
    )


def parse_dark(record: Mapping[str, Any]) -> Dark:
    """Return the dark of a record."""
    return Dark(
        step=record["step"],
        when=record["when"],
        how=record["how"],
        began_s=_real(record["t_begin"]),
        ended_s=_real(record["t_end"]),
        dwells=_dwells(record["detectors"]),
        what=record.get("what", "dark"),
    )


def check_visit(visit: Visit, header: Header) -> None:
    """Raise `RecordError` for a visit that has no place in the layout."""
    step, index = header.step(visit.step), visit.index
    if len(index) != len(step.axes) or min(index) < 0 or not all(map(lt, index, step.shape)):
        raise RecordError(f"visit {visit.number} at {index} lies outside the grid {step.shape}", where=visit.step)
    require_word(visit.status, VISIT_STATUSES)
    _require_detectors(visit.dwells, header)


def check_dark(dark: Dark, header: Header) -> None:
    """Raise `RecordError` for a dark that has no place in the layout."""
    header.step(dark.step)
    require_word(dark.what, DARK_WHAT)
    require_word(dark.when, DARK_WHEN)
    require_word(dark.how, DARK_HOW)
    _require_detectors(dark.dwells, header)


def check_keys(record: Mapping[str, Any]) -> None:
    """Raise `RecordError` for a record of unknown kind, or one that leaves out what its kind must say."""
    kind = record["kind"]
    require_word(kind, tuple(KEYS))
    missing = [key for key in KEYS[kind] if key not in record]
    if missing:
        raise RecordError(f"a record of kind '{kind}' lacks {', '.join(missing)}")
    if kind == "end":
        require_word(record["status"], END_STATUSES)


def require_word(value: str, words: tuple[str, ...]) -> None:
    """Raise `RecordError` unless a record uses one of these words."""
    if value not in words:
        raise RecordError(f"a record says '{value}'", do=f"possible: {', '.join(words)}")


def _require_detectors(dwells: Mapping[str, Dwell], header: Header) -> None:
    for role in dwells:
        require_word(role, header.detectors)


def _real(value: float | None) -> float:
    return math.nan if value is None else float(value)


def _reals(values: Mapping[str, float | None]) -> dict[str, float]:
    # written out, since every record of a run passes here a dozen times
    return {key: math.nan if value is None else float(value) for key, value in values.items()}


def _dwells(records: Mapping[str, Mapping[str, Any]]) -> dict[str, Dwell]:
    return {role: _dwell(record) for role, record in records.items()}


def _dwell(record: Mapping[str, Any]) -> Dwell:
    return Dwell(
        levels_w=tuple([math.nan if level is None else float(level) for level in record["levels_w"]]),
        flags=Flag(record["flags"]),
        range_w=_real(record["range_w"]),
        began_s=_real(record["t_begin"]),
        ended_s=_real(record["t_end"]),
    )
