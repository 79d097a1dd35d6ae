"""Powers less the source's wander."""

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from correction_cases import WATCHED, at_dark, at_visit, level, run_of
from full_bench_cases import BEFORE, CURRENTS, DARKS_W, FULL_BENCH, FULL_HEADER, PLATE, source_w
from numpy.testing import assert_allclose, assert_array_equal

from rigctl.interfaces import Dwell, Flag
from rigctl.record import AxisLayout, Run, StepLayout, dwell_record
from rigctl.record.table import step_table


def test_without_a_monitor_the_factor_is_one() -> None:
    table = step_table(
        run_of([at_dark(0.0, signal=level(1e-9, 0.0)), at_visit(0, 9.0, signal=level(1e-6, 9.0))]), "line"
    )

    assert_array_equal(table["signal_correction_factor"], [1.0, np.nan, np.nan])
    assert_array_equal(table["signal_correction_factor_errors"], [0.0, np.nan, np.nan])


def test_the_monitor_takes_the_sources_wander_out_of_every_step() -> None:
    run = FULL_BENCH.run()
    mean_w = np.mean([source_w(dwells["signal"].began_s + 0.2) for dwells in good_dwells(run)])

    tables = {step.name: step_table(run, step.name) for step in FULL_HEADER.steps}

    for name, share in ((BEFORE.name, 0.25), (PLATE.name, 0.25), (CURRENTS.name, 0.1)):
        corrected = tables[name]["signal_corrected"]
        assert_allclose(corrected[np.isfinite(corrected)], share * mean_w, rtol=1e-9)
    assert np.nanstd(tables[PLATE.name]["signal"]) > 1e-5 * mean_w


def good_dwells(run: Run) -> list[Any]:
    """Dwells of every good visit."""
    return [visit.dwells for step in run.header.steps for visit in run.visits(step.name)]


def test_the_factor_is_the_monitors_mean_over_its_power_each_less_its_dark() -> None:
    powers_w = (1e-4, 2e-4, 3e-4)
    entries = [at_dark(0.0, signal=level(0.0, 0.0), monitor=level(5e-5, 0.0))] + [
        at_visit(n, 9.0 + n, signal=level(1e-6, 9.0 + n), monitor=level(power_w + 5e-5, 9.0 + n))
        for n, power_w in enumerate(powers_w)
    ]

    table = step_table(run_of(entries, WATCHED), "line")

    assert_allclose(table["signal_correction_factor"], [2.0, 1.0, 2.0 / 3.0], rtol=1e-9)
    assert_allclose(table["signal_corrected"], np.array([2.0, 1.0, 2.0 / 3.0]) * 1e-6, rtol=1e-9)


def test_the_monitor_itself_is_not_divided_by_itself() -> None:
    table = step_table(FULL_BENCH.run(), "plate")

    found = np.isfinite(table["monitor"])
    assert (table["monitor_correction_factor"][found] == 1.0).all()
    assert_allclose(table["monitor_corrected"][found], table["monitor"][found] - DARKS_W["monitor"], rtol=1e-9)


@pytest.mark.parametrize(
    "monitor",
    [
        level(1e-4, 9.0, flags=Flag.OVERLOAD),
        level(1e-9, 9.0),
        level(0.5e-9, 9.0),
    ],
    ids=["overloaded", "as dark as the dark", "darker than the dark"],
)
def test_a_visit_whose_monitor_saw_no_light_or_too_much_is_not_corrected(monitor: Any) -> None:
    dark = at_dark(0.0, signal=level(1e-9, 0.0), monitor=level(1e-9, 0.0))
    good = at_visit(1, 12.0, signal=level(1e-6, 12.0), monitor=level(1e-4, 12.0))

    table = step_table(
        run_of([dark, at_visit(0, 9.0, signal=level(1e-6, 9.0), monitor=monitor), good], WATCHED), "line"
    )

    assert np.isnan(table["signal_corrected"]).tolist() == [True, False, True]
    assert np.isfinite(table["signal"]).tolist() == [True, True, False]


def test_a_visit_without_a_reading_of_the_monitor_is_not_corrected() -> None:
    dark = at_dark(0.0, signal=level(1e-9, 0.0), monitor=level(1e-9, 0.0))

    table = step_table(run_of([dark, at_visit(0, 9.0, signal=level(1e-6, 9.0))], WATCHED), "line")

    assert np.isnan(table["signal_corrected"]).all()


def test_a_step_without_any_visit_has_its_corrected_powers_all_the_same() -> None:
    table = step_table(run_of([], WATCHED), "line")

    assert np.isnan(table["signal_corrected"]).all()
    assert table["signal_corrected"].shape == (3,)


def test_only_good_visits_make_the_monitors_mean() -> None:
    dark = at_dark(0.0, signal=level(0.0, 0.0), monitor=level(0.0, 0.0))
    good = at_visit(0, 9.0, signal=level(1e-6, 9.0), monitor=level(1e-4, 9.0))
    saturated = at_visit(1, 12.0, signal=level(1e-6, 12.0), monitor=level(3e-4, 12.0)) | {"status": "saturated"}

    table = step_table(run_of([dark, good, saturated], WATCHED), "line")

    assert table["signal_correction_factor"][0] == pytest.approx(1.0)


def test_the_errors_are_the_scatter_that_noise_gives() -> None:
    count, readings = 1500, 4
    header = replace(WATCHED, steps=(many_visits(count),))
    noise = np.random.default_rng(7).normal(size=(2, count + 1, readings))

    table = step_table(run_of(noisy_records(noise), header), "line")

    errors = table["signal_corrected_errors"]
    scatter = np.std(table["signal_corrected"] - 1e-6, ddof=1)
    # the darks are common to all visits, and too quiet here to count
    assert np.sqrt(np.mean(errors**2)) == pytest.approx(scatter, rel=0.06)


def many_visits(count: int) -> StepLayout:
    """A line of many visits."""
    return StepLayout("line", (AxisLayout("repeat", "repeat", "1", tuple(map(float, range(count)))),))


def noisy_records(noise: Any) -> list[dict[str, Any]]:
    """A quiet dark, then visits at 1 uW with 1 % of noise on the signal and 2 % on the monitor at 10 uW."""

    def both(number: int, t_s: float, share: float) -> dict[str, Any]:
        levels = {
            "signal": 1e-6 * share * (1.0 + 0.01 * noise[0, number]),
            "monitor": 1e-5 * share * (1.0 + 0.02 * noise[1, number]),
        }
        return {
            role: dwell_record(Dwell(tuple(map(float, values)), Flag(0), 2e-3, t_s - 0.2, t_s + 0.2))
            for role, values in levels.items()
        }

    visits = [at_visit(n, 9.0 + n, **both(n, 9.0 + n, 1.0)) for n in range(noise.shape[1] - 1)]
    return [at_dark(0.0, **both(-1, 0.0, 1e-6)), *visits]
