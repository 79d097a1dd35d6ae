"""A run of the full bench: nested grids of mounts, an oven, a diode and repeats, two meters, one of them a monitor."""

from dataclasses import replace
from typing import Any

from record_cases import HEADER, IDENTITY, Case, dwell

from rigctl.record import AxisLayout, StepLayout, dwell_record

BEFORE = StepLayout("empty pair before", (AxisLayout("exit_mount_angle", "exit mount", "deg", (0.0, 15.0, 30.0)),))
PLATE = StepLayout(
    "plate",
    (
        AxisLayout("oven_temperature", "oven", "degC", (22.0, 25.0)),
        AxisLayout("exit_mount_angle", "exit mount", "deg", (0.0,)),
        AxisLayout("part_mount_angle", "part mount", "deg", (0.0, 10.0, 20.0)),
    ),
)
PAIR = StepLayout(
    "pair, shuffled",
    (
        AxisLayout("exit_mount_angle", "exit mount", "deg", (0.0, 20.0, 40.0, 20.0, 0.0)),
        AxisLayout("repeat", "repeat", "1", (1.0, 2.0)),
    ),
)
CURRENTS = StepLayout(
    "light against current",
    (
        AxisLayout("diode_tec_temperature", "diode tec", "degC", (20.0, 25.0)),
        AxisLayout("diode_current", "diode", "A", (0.0, 0.016, 0.032)),
    ),
)
STEPS = (BEFORE, PLATE, PAIR, CURRENTS)
GROUPS = dict(
    zip(
        (step.name for step in STEPS),
        ("empty_pair_before", "plate", "pair_shuffled", "light_against_current"),
        strict=True,
    )
)
FULL_HEADER = replace(HEADER, steps=STEPS, detectors=("signal", "monitor"), monitor="monitor")
SOURCE_W = 2e-3
RANGES_W = {"signal": 2e-3, "monitor": 2e-4}
DARKS_W = {"signal": 3e-9, "monitor": 1e-9}


def source_w(t_s: float) -> float:
    """What the source gives: it wanders by a percent in 100 s."""
    return SOURCE_W * (1.0 + 1e-4 * t_s)


def conditions(t_s: float, oven_c: float = 22.1) -> dict[str, dict[str, float | None]]:
    """What a diode, its controller and an oven say."""
    return {
        "diode": {"current_a": 0.034 + 1e-8 * t_s, "voltage_v": 1.9},
        "diode tec": {"temperature_c": 24.001, "resistance_ohm": 10_450.0},
        "oven": {"temperature_c": oven_c, "resistance_ohm": None},
    }


def detectors(t_s: float, share: float) -> dict[str, Any]:
    """Dwells of both meters: a share of the source's power on one, four percent on the other, each with its dark."""
    powers_w = {"signal": share * source_w(t_s + 0.2), "monitor": 0.04 * source_w(t_s + 0.2)}
    return {
        role: dwell_record(replace(dwell(power_w + DARKS_W[role], began_s=t_s), range_w=RANGES_W[role]))
        for role, power_w in powers_w.items()
    }


def full_dark(what: str, when: str, t_s: float, *, step: str = "plate") -> dict[str, Any]:
    """The record of a dark of any kind."""
    how = {"dark": "by shutter", "background": "source off", "zero": "by hand"}[what]
    about = {"kind": "dark", "what": what, "step": step, "when": when, "how": how}
    return about | {"t_begin": t_s, "t_end": t_s + 0.5, "detectors": detectors(t_s, 0.0) | _dark_monitor(t_s)}


def _dark_monitor(t_s: float) -> dict[str, Any]:
    level = replace(dwell(DARKS_W["monitor"], began_s=t_s), range_w=RANGES_W["monitor"])
    return {"monitor": dwell_record(level)}


def full_visit(number: int, step: StepLayout, index: tuple[int, ...], *, share: float = 0.25) -> dict[str, Any]:
    """The record of a visit, made 2 s after the one before."""
    t_s = 20.0 + 2.0 * number
    asked = {axis.role: axis.values[at] for axis, at in zip(step.axes, index, strict=True)}
    return {
        "kind": "visit",
        "step": step.name,
        "visit": number,
        "index": list(index),
        "attempt": 1,
        "start": 1,
        "t_begin": t_s,
        "t_end": t_s + 1.0,
        "asked": asked,
        "read": {role: value + 0.001 for role, value in asked.items() if role != "repeat"},
        "detectors": detectors(t_s, share),
        "conditions": conditions(t_s),
        "present": {"part": step.name != BEFORE.name},
        "confirmed": step.name != BEFORE.name,
        "status": "ok",
        "why": "",
    }


def failed(record: dict[str, Any]) -> dict[str, Any]:
    """A visit that came to nothing, as a run records it."""
    without = ("read", "detectors", "conditions", "present", "confirmed")
    return {key: value for key, value in record.items() if key not in without} | {"status": "failed", "why": "no reply"}


def full_records() -> list[dict[str, Any]]:
    """A run that was not finished: each step has a visit that is missing or that failed."""
    heating = {"kind": "reading", "t": 3.5, "role": "oven", "values": {"temperature_c": 21.5, "resistance_ohm": None}}
    return [
        {"kind": "identity", "instrument": "tec 1", "role": "oven", "identity": IDENTITY},
        {"kind": "settings", "instrument": "tec 1", "values": {"limit_c": 60.0}},
        full_dark("zero", "before", 1.0),
        full_dark("background", "before", 2.0),
        heating,
        heating | {"t": 4.5, "values": {"temperature_c": 21.9, "resistance_ohm": 11_000.0}},
        full_dark("dark", "before", 5.0),
        full_dark("dark", "before", 6.0),
        full_visit(0, BEFORE, (0,)),
        failed(full_visit(1, BEFORE, (1,))),
        full_visit(2, PLATE, (0, 0, 2)),
        full_visit(3, PLATE, (0, 0, 0)),
        full_dark("dark", "during", 27.2),
        full_visit(4, PLATE, (1, 0, 1)),
        full_visit(5, PAIR, (0, 0), share=0.5),
        full_visit(6, PAIR, (1, 1), share=0.4),
        full_visit(7, PAIR, (3, 1), share=0.3),
        full_visit(8, CURRENTS, (1, 2), share=0.1),
        full_dark("dark", "after", 50.0, step=CURRENTS.name),
    ]


FULL_BENCH = Case(FULL_HEADER, full_records, GROUPS)
