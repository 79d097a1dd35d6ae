"""Which records of a run count in its fit, and as what."""

import math
from collections.abc import Mapping, Sequence
from dataclasses import replace
from datetime import UTC, datetime
from typing import Any

import numpy as np
import pytest

from rigctl.errors import UndecidedError
from rigctl.estimates import Data, fit_run, run_data, truth_of
from rigctl.files import parse_recipe
from rigctl.files.arrangement import train_of
from rigctl.interfaces import Dwell, Flag
from rigctl.optics import Visits, readings
from rigctl.record import AxisLayout, Document, Header, Run, StepLayout, dwell_record

RECIPE = """
recipe: sheet polarizer by hand
roles: {part mount: rotation stage, signal: power meter}
source: {wavelength: 785.2 nm, power: 2 mW}
optics:
  - polarizer: {name: entry polarizer, axis: 0 deg, extinction ratio: 100000:1}
  - polarizer: {name: part, turned by: part mount, extinction ratio: 1000:1, unknown: [extinction ratio, dial offset]}
  - detector: {role: signal}
sweep: [{part mount: {turn: 1, step: 30 deg}}]
dwell: {time: 400 ms, at least: 4 readings}
dark: {by: hand}
"""
ANGLES = tuple(30.0 * n for n in range(12))
HEADER = Header(
    uuid="7",
    start=datetime(2026, 1, 5, tzinfo=UTC),
    title="sheet polarizer by hand",
    recipe=Document.of(RECIPE, "recipe.yaml"),
    rig=Document.of("rig: none\n", "rig.yaml"),
    steps=(StepLayout("data", (AxisLayout("part_mount_angle", "part mount", "deg", ANGLES),)),),
    detectors=("signal",),
)
TRUTH = {"part.extinction ratio": 2e-3, "part.dial offset": 12.5, "source.power": 1.9e-3, "signal.stray light": 4e-7}


def dwell(*levels_w: float, began_s: float = 0.0) -> Dwell:
    flags = Flag(0) if all(map(math.isfinite, levels_w)) else Flag.OVERLOAD
    return Dwell(levels_w, flags, 2e-3, began_s, began_s + 0.4)


def visit(
    number: int, *levels_w: float, status: str = "ok", attempt: int = 1, began_s: float = 0.0, off_deg: float = 0.0
) -> dict[str, Any]:
    """The record of a visit whose mount stands a bit off the angle asked for; without levels it was not measured."""
    detectors = {"signal": dwell_record(dwell(*levels_w, began_s=began_s))} if levels_w else {}
    return {
        "kind": "visit", "step": "data", "visit": number, "index": [number], "attempt": attempt, "start": 1,
        "t_begin": began_s, "t_end": began_s + 1.0, "asked": {"part mount": ANGLES[number]},
        "read": {"part mount": ANGLES[number] + off_deg}, "detectors": detectors, "status": status, "why": "",
    }  # fmt: skip


def dark(*levels_w: float, when: str = "before", began_s: float = 0.0) -> dict[str, Any]:
    return {
        "kind": "dark", "step": "data", "when": when, "how": "by hand", "t_begin": began_s, "t_end": began_s + 1.0,
        "detectors": {"signal": dwell_record(dwell(*levels_w, began_s=began_s))},
    }  # fmt: skip


def run_of(*records: Mapping[str, Any], header: Header = HEADER) -> Run:
    run = Run(header, is_live=False)
    for record in records:
        run.keep(record, run.parse(record))
    return run


def power_w(data: Data) -> list[float]:
    return [float(value) for value in data.observed["signal"].power_w]


def measured_run(*, leave_out: Sequence[int] = (), overload: Sequence[int] = ()) -> Run:
    """A run as the train says it, with noise of a tenth of a nanowatt on every reading."""
    train = train_of(parse_recipe(RECIPE, "recipe.yaml"))
    nominal = {name: quantity.value for name, quantity in train.quantities.items()}
    visits = Visits({"part mount": np.array([*ANGLES, 0.0])}, np.array([True] * 12 + [False]), np.zeros(13))
    levels_w = readings(train, visits, nominal | TRUTH)["signal"]
    noisy_w = levels_w[:, None] + np.random.default_rng(7).normal(0.0, 1e-10, (13, 4))
    records = [dark(*noisy_w[12])]
    for number, levels in enumerate(noisy_w[:12]):
        if number in overload:
            records.append(visit(number, math.nan, math.nan, status="saturated"))
        elif number not in leave_out:
            records.append(visit(number, *levels))
    return run_of(*records)


def test_visits_and_darks_stand_in_one_table_and_only_the_darks_are_blocked() -> None:
    data = run_data(run_of(dark(1e-9, 3e-9), visit(0, 1e-3, 3e-3), visit(1, 5e-4, 7e-4), dark(4e-9, 6e-9)))

    assert data.visits.is_open.tolist() == [True, True, False, False]
    assert power_w(data) == pytest.approx([2e-3, 6e-4, 2e-9, 5e-9])


def test_a_failed_attempt_is_replaced_by_the_good_one() -> None:
    data = run_data(run_of(visit(0, status="failed"), visit(0, 1e-3, 1e-3, attempt=2)))

    assert power_w(data) == [1e-3]
    assert (data.saturated, data.missing) == (0, 11)


def test_of_two_good_attempts_the_last_counts() -> None:
    data = run_data(run_of(visit(0, 1e-3, 1e-3), visit(0, 2e-3, 2e-3, attempt=2)))

    assert power_w(data) == [2e-3]


def test_an_overloaded_visit_that_was_repeated_on_the_next_range_counts_once() -> None:
    data = run_data(run_of(visit(0, math.nan, 2e-3, status="saturated"), visit(0, 2e-3, 2e-3, attempt=2)))

    assert power_w(data) == [2e-3]
    assert data.saturated == 0


def test_visits_that_stayed_overloaded_or_failed_are_counted_and_left_out() -> None:
    data = run_data(
        run_of(visit(0, 1e-3, 1e-3), visit(1, math.nan, 2e-3, status="saturated"), visit(2, status="failed"))
    )

    assert power_w(data) == [1e-3]
    assert (data.saturated, data.missing) == (1, 10)


def test_a_whole_run_misses_nothing() -> None:
    data = run_data(run_of(*(visit(number, 1e-3, 1e-3) for number in range(12))))

    assert (data.saturated, data.missing) == (0, 0)


def test_mean_scatter_and_number_are_those_of_the_readings() -> None:
    observed = run_data(run_of(visit(0, 1e-3, 2e-3, 3e-3, 6e-3))).observed["signal"]

    assert observed.power_w[0] == pytest.approx(3e-3)
    assert observed.sd_w[0] == pytest.approx(math.sqrt(14.0 / 3.0) * 1e-3)
    assert observed.n[0] == 4


def test_flagged_readings_are_left_out_of_mean_scatter_and_number() -> None:
    observed = run_data(run_of(visit(0, 1e-3, math.nan, 3e-3, math.nan))).observed["signal"]

    assert observed.power_w[0] == pytest.approx(2e-3)
    assert observed.sd_w[0] == pytest.approx(math.sqrt(2.0) * 1e-3)
    assert observed.n[0] == 2


def test_one_reading_has_no_scatter_and_none_has_no_mean() -> None:
    observed = run_data(run_of(visit(0, 1e-3, math.nan), dark(math.nan, math.nan))).observed["signal"]

    assert observed.n.tolist() == [1, 0]
    assert observed.power_w[0] == 1e-3
    assert np.isnan(observed.power_w[1])
    assert np.isnan(observed.sd_w).all()


def test_the_angle_that_counts_is_the_one_that_was_read_back() -> None:
    data = run_data(run_of(visit(2, 1e-3, 1e-3, off_deg=0.003), dark(1e-9, 1e-9)))

    assert data.visits.angle_deg["part mount"][data.visits.is_open].tolist() == [60.003]


def test_the_time_of_a_visit_is_the_middle_of_its_dwell_in_hours() -> None:
    data = run_data(run_of(visit(0, 1e-3, 1e-3, began_s=3600.0), dark(1e-9, 1e-9, began_s=7200.0)))

    assert data.visits.time_h.tolist() == pytest.approx([1.0 + 0.2 / 3600.0, 2.0 + 0.2 / 3600.0])


@pytest.mark.parametrize("records", [[], [dark(1e-9, 1e-9)], [dark(1e-9, 1e-9), visit(0, status="failed")]])
def test_a_run_without_a_completed_visit_is_undecided(records: list[dict[str, Any]]) -> None:
    with pytest.raises(UndecidedError, match="no visit was completed"):
        run_data(run_of(*records))


def test_a_fit_of_a_run_finds_what_was_put_in() -> None:
    fitted = fit_run(measured_run())

    for name, true in TRUTH.items():
        estimate = fitted.estimate(name)
        assert estimate is not None
        assert estimate.value == pytest.approx(true, rel=2e-4), name
    assert fitted.notes == ()


def test_a_fit_tells_how_many_visits_it_could_not_use() -> None:
    fitted = fit_run(measured_run(leave_out=[3, 7], overload=[5]))

    assert fitted.notes == (
        "visits left out because a detector was overloaded: 1",
        "planned visits that were not measured: 2",
    )
    estimate = fitted.estimate("part.dial offset")
    assert estimate is not None
    assert estimate.value == pytest.approx(12.5, abs=1e-3)


def test_the_truth_of_the_power_is_that_in_the_middle_of_the_visits() -> None:
    header = replace(HEADER, truth={"source.power": 2e-3, "source.drift": 0.01, "part.dial offset": 12.5})
    run = run_of(
        visit(0, 1e-3, 1e-3, began_s=3600.0 - 0.2), visit(1, 1e-3, 1e-3, began_s=3 * 3600.0 - 0.2), header=header
    )

    truth = truth_of(run)

    assert truth["source.power"] == pytest.approx(2e-3 * 1.02)
    assert (truth["source.drift"], truth["part.dial offset"]) == (0.01, 12.5)
    assert header.truth["source.power"] == 2e-3


def test_hardware_has_no_truth() -> None:
    assert truth_of(run_of(visit(0, 1e-3, 1e-3))) == {}
