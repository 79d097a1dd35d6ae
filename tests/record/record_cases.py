"""Runs to test the run file with: a header with awkward words, every kind of record, every state of a run."""

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace
from datetime import datetime, timedelta, timezone
from pathlib import Path
from typing import Any, Protocol

from rigctl.interfaces import Dwell, Flag
from rigctl.record import (
    AxisLayout,
    Document,
    Header,
    Run,
    RunWriter,
    StepLayout,
    create_run,
    dwell_record,
    load_run,
)

NAN = float("nan")
START = datetime(2026, 12, 1, 4, 20, 0, 250_000, timezone(timedelta(hours=5, minutes=30)))
PLATE = StepLayout("plate", (AxisLayout("part_mount_angle", "part mount", "deg", (0.0, 5.0, 10.0, 15.0)),))
PAIR = StepLayout(
    "empty pair",
    (
        AxisLayout("analyser_angle", "analyser", "deg", (0.0, 45.0)),
        AxisLayout("part_mount_angle", "part mount", "deg", (0.0, 30.0, 60.0)),
    ),
)
RECIPE = Document.of("recipe: λ/4 plate\nroles: {part mount: rotation stage}\n", "λ quarter.yaml")
RIG = Document.of("rig: bench 2\n", "bench-2.yaml")
HEADER = Header(
    uuid="6a1b7e3e-0000-4000-8000-000000000007",
    start=START,
    title="λ/4 plate at 22 °C",
    recipe=RECIPE,
    rig=RIG,
    steps=(PLATE, PAIR),
    detectors=("signal", "reference monitor"),
    versions={"polrig": "0.1.0", "numpy": "2.4.6"},
    is_simulated=True,
    seed=7,
    truth={"part.retardance": 0.2513, "part.dial offset": 1.25},
    operator="Jürgen 李",
    part="QWP-118",
)
IDENTITY = {"maker": "polrig", "model": "simulated power meter", "serial": "0012", "firmware": "1.4"}


def dwell(mean_w: float, *, began_s: float, flags: int = 0, levels: int = 4) -> Dwell:
    """A dwell whose readings lie evenly about a mean."""
    readings = [mean_w * (1.0 + 1e-3 * (i - (levels - 1) / 2.0)) for i in range(levels)]
    return Dwell(tuple(readings), Flag(flags), 2e-3, began_s, began_s + 0.4)


def both(mean_w: float, *, began_s: float) -> dict[str, Any]:
    """Dwells of both detectors, as records."""
    return {
        "signal": dwell_record(dwell(mean_w, began_s=began_s)),
        "reference monitor": dwell_record(dwell(mean_w / 10, began_s=began_s + 0.01, levels=3)),
    }


def visit(
    number: int,
    index: Sequence[int],
    *,
    step: str = "plate",
    attempt: int = 1,
    status: str = "ok",
    detectors: Mapping[str, Any] | None = None,
) -> dict[str, Any]:
    """The record of a visit that began 2 s after the one before."""
    began_s = 20.0 + 2.0 * number + 0.25 * attempt
    return {
        "kind": "visit",
        "step": step,
        "visit": number,
        "index": list(index),
        "attempt": attempt,
        "start": 1,
        "t_begin": began_s,
        "t_end": began_s + 1.0,
        "asked": {"part mount": 5.0 * index[-1]},
        "read": {"part mount": 5.0 * index[-1] + 0.001},
        "detectors": both(1e-4 * (1 + number), began_s=began_s + 0.5) if detectors is None else detectors,
        "status": status,
        "why": "" if status == "ok" else "no reply in time",
    }


def dark(when: str, t_s: float) -> dict[str, Any]:
    """The record of a dark."""
    return {
        "kind": "dark",
        "step": "plate",
        "when": when,
        "how": "by hand",
        "t_begin": t_s,
        "t_end": t_s + 1.0,
        "detectors": both(3e-9, began_s=t_s + 0.5),
    }


def records() -> list[dict[str, Any]]:
    """Records of every kind: a retried, a failed and a saturated visit, and one that was never made."""
    return [
        {"kind": "identity", "instrument": "head 7", "role": "signal", "identity": IDENTITY},
        {"kind": "identity", "instrument": "relay", "role": "shutter", "identity": IDENTITY},
        {
            "kind": "settings",
            "instrument": "head 7",
            "values": {"range": 2e-3, "averaging": "off", "zéro": 1},
        },
        {
            "kind": "calibration",
            "instrument": "head 7",
            "values": {"certificate": "K-2291", "due": "2027-03-01"},
        },
        dark("before", 1.0),
        visit(0, [0]),
        visit(1, [1], status="failed", detectors={}),
        visit(1, [1], attempt=2),
        visit(2, [2], status="saturated"),
        {"kind": "event", "t": 30.0, "text": "the lamp was switched off — at last", "level": "info"},
        visit(3, [0, 2], step="empty pair"),
        visit(4, [1, 0], step="empty pair", status="failed", detectors={}),
        dark("after", 40.0),
    ]


@dataclass(frozen=True)
class Case:
    """A run to record: its header, its records, and the group of each step in the file."""

    header: Header
    records: Callable[[], list[dict[str, Any]]]
    groups: Mapping[str, str]

    def run(self) -> Run:
        """What a file of it is made of."""
        run = Run(self.header, is_live=False)
        for record in self.records():
            run.keep(record, run.parse(record))
        return run


TWO_STEPS = Case(HEADER, records, {"plate": "plate", "empty pair": "empty_pair"})


def write(path: Path, case: Case = TWO_STEPS, *, durable: bool = False) -> RunWriter:
    """Record everything, and leave the run open."""
    writer = create_run(path, case.header, durable=durable)
    for record in case.records():
        writer.append(record)
    return writer


def finished(path: Path, case: Case = TWO_STEPS) -> None:
    """A run that went to its end."""
    with write(path, case) as writer:
        writer.close("complete", t_s=42.0)


def stopped(path: Path, case: Case = TWO_STEPS) -> None:
    """A run that was stopped on purpose."""
    with write(path, case, durable=True) as writer:
        writer.close("stopped", t_s=41.0, code=6, why="stopped by the operator")


def killed(path: Path, case: Case = TWO_STEPS) -> None:
    """A run whose program died: a view from its middle, and the journal with a torn line beside it."""
    with write(path, case, durable=True) as writer:
        writer.view()
    with path.with_name(path.name + ".journal").open("ab") as journal:
        journal.write(b'0badc0de 120 {"kind":"vis')


def recovered(path: Path, case: Case = TWO_STEPS) -> None:
    """A run whose program died, and that was read since."""
    killed(path, case)
    load_run(path)


def view_only(path: Path, case: Case = TWO_STEPS) -> None:
    """A copy of the file alone, made while the run lasted."""
    with write(path, case, durable=True) as writer:
        writer.view()
    path.with_name(path.name + ".journal").unlink()


class Record(Protocol):
    """Brings a run file of a case about."""

    def __call__(self, path: Path, case: Case = TWO_STEPS) -> None: ...


STATES: Mapping[str, Record] = {
    "finished": finished,
    "stopped": stopped,
    "killed": killed,
    "recovered": recovered,
    "view only": view_only,
}
STATUS = {
    "finished": "complete",
    "stopped": "stopped",
    "killed": "recovered",
    "recovered": "recovered",
    "view only": "recovered",
}


def small_header(visits: int) -> Header:
    """A header with one step of many visits and one detector."""
    axis = AxisLayout("part_mount_angle", "part mount", "deg", tuple(float(i) for i in range(visits)))
    return replace(HEADER, steps=(StepLayout("data", (axis,)),), detectors=("signal",))


def small_visit(number: int) -> dict[str, Any]:
    """The record of a visit that fits `small_header`."""
    level = dwell_record(dwell(1e-6 * (number + 1), began_s=float(number)))
    return visit(number, [number], step="data", detectors={"signal": level})
