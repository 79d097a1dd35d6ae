"""A line of three visits with dwells and darks given one by one, for what corrects a power."""

from collections.abc import Sequence
from dataclasses import replace
from typing import Any

from full_bench_cases import FULL_HEADER, full_dark, full_visit

from rigctl.interfaces import Dwell, Flag
from rigctl.record import AxisLayout, Header, Run, StepLayout, dwell_record

LINE = StepLayout("line", (AxisLayout("repeat", "repeat", "1", (1.0, 2.0, 3.0)),))
ALONE = replace(FULL_HEADER, steps=(LINE,), detectors=("signal",), monitor="")
WATCHED = replace(ALONE, detectors=("signal", "monitor"), monitor="monitor")


def run_of(entries: Sequence[dict[str, Any]], header: Header = ALONE) -> Run:
    """A run that recorded these."""
    run = Run(header, is_live=False)
    for record in entries:
        run.keep(record, run.parse(record))
    return run


def level(power_w: float, t_s: float, *, range_w: float = 2e-3, flags: int = 0, spread_w: float = 1e-10) -> Any:
    """The record of a dwell of three readings, its middle at an instant."""
    readings = (power_w - spread_w, power_w, power_w + spread_w)
    return dwell_record(Dwell(readings, Flag(flags), range_w, t_s - 0.2, t_s + 0.2))


def at_visit(number: int, t_s: float, **levels: Any) -> dict[str, Any]:
    """A visit of the line whose dwells are given by role."""
    about = {"index": [number], "t_begin": t_s - 0.5, "t_end": t_s + 0.5, "detectors": levels}
    return full_visit(number, LINE, (0,)) | about


def at_dark(t_s: float, *, what: str = "dark", when: str = "before", **levels: Any) -> dict[str, Any]:
    """A dark whose dwells are given by role."""
    times = {"t_begin": t_s - 0.3, "t_end": t_s + 0.3}
    return full_dark(what, when, t_s, step="line") | times | {"detectors": levels}
