"""What records become in the labelled arrays."""

import math
from collections.abc import Sequence
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_array_equal
from record_cases import HEADER, PLATE, dark, dwell, records, visit

from rigctl.interfaces import Flag
from rigctl.record import AxisLayout, Header, Run, StepLayout, dwell_record
from rigctl.record.detectors import moments
from rigctl.record.table import Table, dark_table, step_table


def run_of(entries: Sequence[dict[str, Any]], header: Header = HEADER) -> Run:
    """A run that recorded these."""
    run = Run(header, is_live=False)
    for record in entries:
        run.keep(record, run.parse(record))
    return run


def units(table: Table, name: str) -> object:
    """Units of a variable."""
    return next(v.attributes.get("units") for v in (*table.axes, *table.variables) if v.name == name)


def words(table: Table, name: str) -> list[str]:
    """What the numbers of a variable stand for."""
    variable = next(v for v in table.variables if v.name == name)
    meanings = str(variable.attributes["flag_meanings"]).split()
    return [meanings[number] for number in variable.values.ravel()]


def test_an_empty_step_is_all_nan_with_status_not_measured() -> None:
    table = step_table(run_of([]), "empty pair")

    assert np.isnan(table["signal"]).all()
    assert table["signal"].shape == (2, 3)
    assert_array_equal(table["status"], np.zeros((2, 3)))
    assert_array_equal(table["visit"], np.full((2, 3), -1))


def test_a_value_stands_at_its_place_in_the_grid() -> None:
    table = step_table(run_of(records()), "empty pair")

    expected = np.full((2, 3), np.nan)
    expected[0, 2] = 4e-4
    np.testing.assert_allclose(table["signal"], expected, rtol=1e-12)


def test_statuses_tell_what_happened_at_each_visit() -> None:
    table = step_table(run_of(records()), "plate")

    assert table["status"].tolist() == [1, 2, 3, 0]
    assert table["attempt"].tolist() == [1, 2, 1, 0]
    assert table["visit"].tolist() == [0, 1, 2, -1]
    assert step_table(run_of(records()), "empty pair")["status"].tolist() == [[0, 0, 1], [4, 0, 0]]


def test_axes_are_named_after_role_and_quantity_slowest_first() -> None:
    table = step_table(run_of([]), "empty pair")

    assert [axis.name for axis in table.axes] == ["analyser_angle", "part_mount_angle"]
    assert table["part_mount_angle"].tolist() == [0.0, 30.0, 60.0]
    assert units(table, "part_mount_angle") == "deg"


def test_the_angle_read_back_is_a_variable_of_its_own() -> None:
    table = step_table(run_of([visit(0, [2])]), "plate")

    assert_array_equal(table["part_mount_angle_read"], [np.nan, np.nan, 10.001, np.nan])
    assert units(table, "part_mount_angle_read") == "deg"


def test_an_angle_that_was_not_read_back_is_nan() -> None:
    table = step_table(run_of([visit(0, [2]) | {"read": {}}]), "plate")

    assert np.isnan(table["part_mount_angle_read"]).all()


def test_time_is_the_middle_of_the_dwells_counted_from_the_start() -> None:
    table = step_table(run_of([visit(0, [0])]), "plate")

    assert table["time"][0] == pytest.approx((20.75 + 21.16) / 2)
    assert units(table, "time") == "seconds since 2026-12-01T04:20:00.250000+05:30"


def test_a_visit_without_a_dwell_is_placed_in_time_by_its_own_bounds() -> None:
    table = step_table(run_of([visit(1, [0], status="failed", detectors={})]), "plate")

    assert table["time"][0] == pytest.approx(22.75)


def test_each_detector_has_mean_uncertainty_spread_count_range_and_flags() -> None:
    level = dwell_record(dwell(2e-4, began_s=1.0, flags=Flag.QUESTIONABLE))
    table = step_table(run_of([visit(0, [1], detectors={"signal": level})]), "plate")

    readings = np.array(level["levels_w"])
    assert table["signal"][1] == pytest.approx(readings.mean(), rel=1e-14)
    assert table["signal_sd"][1] == pytest.approx(readings.std(ddof=1), rel=1e-12)
    assert table["signal_errors"][1] == pytest.approx(readings.std(ddof=1) / 2.0, rel=1e-12)
    assert table["signal_n"].tolist() == [0, 4, 0, 0]
    assert table["signal_range"][1] == 2e-3
    assert table["signal_flags"].tolist() == [0, 8, 0, 0]
    assert_array_equal(table["signal_levels"][1], readings)


def test_readings_of_dwells_of_different_length_are_all_kept() -> None:
    entries = [
        visit(i, [i], detectors={"signal": dwell_record(dwell(1e-4, began_s=1.0, levels=n))})
        for i, n in ((0, 2), (1, 5))
    ]

    table = step_table(run_of(entries), "plate")

    assert np.isfinite(table["signal_levels"]).sum(axis=-1).tolist() == [2, 5, 0, 0]
    assert table["signal_reading"].tolist() == [0, 1, 2, 3, 4]
    assert table["signal_n"].tolist() == [2, 5, 0, 0]


def test_a_detector_is_called_after_its_role() -> None:
    table = step_table(run_of([]), "plate")

    assert table.signals == ("signal", "reference_monitor")


def test_roles_that_sound_like_our_own_variables_get_names_that_differ() -> None:
    header = replace(HEADER, detectors=("time", "status", "part mount angle"), steps=(PLATE,))

    table = step_table(run_of([], header), "plate")

    names = [v.name for v in (*table.axes, *table.scales, *table.variables)]
    assert table.signals == ("time_2", "status_2", "part_mount_angle_2")
    assert len(set(names)) == len(names)


def test_an_axis_called_time_does_not_hide_the_time() -> None:
    step = StepLayout("data", (AxisLayout("time", "clock", "s", (0.0, 1.0)),))

    table = step_table(run_of([], replace(HEADER, steps=(step,))), "data")

    assert [axis.name for axis in table.axes] == ["time_2"]


def test_darks_are_in_the_order_of_time_with_all_readings() -> None:
    table = dark_table(run_of(records()))

    assert table["time"].tolist() == pytest.approx([1.705, 40.705])
    assert words(table, "when") == ["before", "after"]
    assert table["step"].tolist() == [0, 0]
    np.testing.assert_allclose(table["signal"], [3e-9, 3e-9])
    assert table["reference_monitor_levels"].shape == (2, 3)


def test_a_dark_of_the_second_step_says_so() -> None:
    table = dark_table(run_of([dark("before", 1.0) | {"step": "empty pair", "how": "by shutter"}]))

    assert table["step"].tolist() == [1]
    assert table["how"].tolist() == [1]


@pytest.mark.parametrize(("what", "how"), [("dark", "by_shutter"), ("background", "source_off"), ("zero", "by_hand")])
def test_a_dark_a_background_and_a_zero_are_kept_apart(what: str, how: str) -> None:
    record = dark("during", 1.0) | {"what": what, "how": how.replace("_", " ")}

    table = dark_table(run_of([record]))

    assert (words(table, "what"), words(table, "when"), words(table, "how")) == ([what], ["during"], [how])


def test_words_behind_numbers_are_told_as_cf_flags() -> None:
    table = dark_table(run_of(records()))
    words = next(v for v in table.variables if v.name == "step").attributes

    assert words["flag_values"].tolist() == [0, 1]
    assert words["flag_meanings"] == "plate empty_pair"


def test_a_simulated_power_says_so_and_a_measured_one_does_not() -> None:
    simulated = step_table(run_of([]), "plate").variables[0]
    measured = step_table(run_of([], replace(HEADER, is_simulated=False)), "plate").variables[0]

    assert simulated.attributes["simulated"] == 1
    assert "simulated" not in measured.attributes


@pytest.mark.parametrize("flag", [Flag.OVERLOAD, Flag.UNDERRANGE])
def test_a_dwell_cut_off_by_its_range_has_no_mean_though_readings_are_left(flag: Flag) -> None:
    mean, sd, n = moments(np.array([[1.0, 2.0, np.nan]]), np.array([int(flag)]))

    assert math.isnan(mean[0])
    assert math.isnan(sd[0])
    assert n.tolist() == [2]


def test_a_reading_that_is_not_a_number_leaves_the_others_their_mean() -> None:
    mean, sd, n = moments(np.array([[1.0, 3.0, np.nan]]), np.array([int(Flag.NOT_A_NUMBER)]))

    assert mean.tolist() == [2.0]
    assert sd.tolist() == pytest.approx([math.sqrt(2.0)])
    assert n.tolist() == [2]


def test_one_reading_has_a_mean_and_no_spread() -> None:
    mean, sd, n = moments(np.array([[5.0]]), np.array([0]))

    assert mean.tolist() == [5.0]
    assert math.isnan(sd[0])
    assert n.tolist() == [1]


@given(st.lists(st.floats(1e-12, 1e-2), min_size=2, max_size=9))
def test_moments_agree_with_numpy_where_nothing_is_missing(levels: list[float]) -> None:
    mean, sd, _ = moments(np.array([levels]), np.array([0]))

    assert mean[0] == pytest.approx(np.mean(levels), rel=1e-12)
    assert sd[0] == pytest.approx(np.std(levels, ddof=1), rel=1e-9, abs=1e-20)
