"""What sources and controllers said."""

from typing import Any

import numpy as np
import pytest
from full_bench_cases import BEFORE, CURRENTS, FULL_BENCH, FULL_HEADER, PAIR, PLATE, conditions, full_visit
from numpy.testing import assert_array_equal

from rigctl.record import Run
from rigctl.record.conditions import logs, quantity_and_units, said_roles
from rigctl.record.table import Table, step_table


def run_of(*entries: dict[str, Any]) -> Run:
    """A run that recorded these."""
    run = Run(FULL_HEADER, is_live=False)
    for record in entries:
        run.keep(record, run.parse(record))
    return run


def names(table: Table) -> set[str]:
    """Names of all variables."""
    return {variable.name for variable in table.variables}


def attributes(table: Table, name: str) -> Any:
    """Attributes of a variable."""
    return next(variable.attributes for variable in table.variables if variable.name == name)


@pytest.mark.parametrize(
    ("key", "expected"),
    [
        ("current_a", ("current", "A")),
        ("voltage_v", ("voltage", "V")),
        ("temperature_c", ("temperature", "degC")),
        ("resistance_ohm", ("resistance", "ohm")),
        ("humidity", ("humidity", "1")),
        ("duty_cycle", ("duty_cycle", "1")),
        ("_c", ("_c", "1")),
    ],
)
def test_a_key_tells_its_quantity_and_its_units(key: str, expected: tuple[str, str]) -> None:
    assert quantity_and_units(key) == expected


def test_a_condition_is_a_variable_named_after_role_and_quantity() -> None:
    table = step_table(run_of(full_visit(0, BEFORE, (1,))), BEFORE.name)

    assert {"diode_current", "diode_voltage", "diode_tec_temperature", "diode_tec_resistance"} <= names(table)
    assert_array_equal(table["diode_voltage"], [np.nan, 1.9, np.nan])
    assert attributes(table, "diode_voltage")["units"] == "V"
    assert attributes(table, "diode_tec_temperature")["units"] == "degC"
    assert attributes(table, "diode_tec_resistance")["long_name"] == "diode tec, resistance read at the visit"


def test_what_is_swept_is_read_back_beside_its_axis_and_not_told_twice() -> None:
    table = step_table(run_of(full_visit(0, PLATE, (1, 0, 2))), "plate")

    assert table["oven_temperature_read"][1, 0, 2] == 25.001
    assert attributes(table, "oven_temperature_read")["units"] == "degC"
    assert {"oven_resistance", "diode_tec_temperature", "diode_current"} <= names(table)
    assert "oven_temperature" not in names(table)


def test_a_swept_current_is_read_in_amperes() -> None:
    table = step_table(run_of(full_visit(0, CURRENTS, (1, 2))), CURRENTS.name)

    assert table["diode_current_read"][1, 2] == pytest.approx(0.033)
    assert {"diode_voltage", "diode_tec_resistance"} <= names(table)
    assert "diode_tec_temperature" not in names(table)


def test_a_condition_that_was_no_number_is_nan() -> None:
    table = step_table(run_of(full_visit(0, PLATE, (1, 0, 2))), "plate")

    assert np.isnan(table["oven_resistance"]).all()


def test_roles_that_spoke_at_some_visits_only_are_nan_at_the_others() -> None:
    silent = full_visit(0, BEFORE, (0,)) | {"conditions": {}}

    table = step_table(run_of(silent, full_visit(1, BEFORE, (1,))), BEFORE.name)

    assert np.isfinite(table["diode_voltage"]).tolist() == [False, True, False]


def test_a_condition_called_like_a_variable_of_ours_gets_out_of_its_way() -> None:
    visit = full_visit(0, BEFORE, (0,)) | {"conditions": {"signal": {"sd": 1.0}, "exit mount": {"angle_read": 2.0}}}

    table = step_table(run_of(visit), BEFORE.name)

    assert table["signal_sd_2"][0] == 1.0
    assert table["exit_mount_angle_read_2"][0] == 2.0


def test_a_repeat_is_an_axis_that_nothing_reads_back() -> None:
    table = step_table(run_of(full_visit(0, PAIR, (3, 1))), PAIR.name)

    axis = next(axis for axis in table.axes if axis.name == "repeat")
    assert axis.attributes == {"units": "1", "long_name": "number of the repeat"}
    assert "repeat_read" not in names(table)
    assert "exit_mount_angle_read" in names(table)


def test_presence_and_confirmation_stand_beside_each_visit() -> None:
    table = step_table(FULL_BENCH.run(), BEFORE.name)

    assert table["part_present"].tolist() == [0, -1, -1]
    assert table["confirmed"].tolist() == [0, -1, -1]
    assert step_table(FULL_BENCH.run(), "plate")["confirmed"].ravel().tolist() == [1, -1, 1, -1, 1, -1]
    assert attributes(table, "confirmed")["flag_meanings"] == "unknown no yes"
    assert attributes(table, "part_present")["flag_values"].tolist() == [-1, 0, 1]


def test_a_log_holds_readings_between_visits_and_at_visits_in_the_order_of_time() -> None:
    found = {log.name: log for log in logs(FULL_BENCH.run())}

    oven = found["oven_temperature"]
    assert oven.times_s[:4].tolist() == [3.5, 4.5, 21.0, 25.0]
    assert oven.values[:3].tolist() == [21.5, 21.9, 22.1]
    assert (oven.role, oven.quantity, oven.units) == ("oven", "temperature", "degC")
    assert (np.diff(oven.times_s) > 0).all()


def test_a_log_keeps_its_order_though_a_reading_came_between_two_visits() -> None:
    between = {"kind": "reading", "t": 22.0, "role": "oven", "values": {"temperature_c": 30.0}}

    run = run_of(full_visit(0, BEFORE, (0,)), between, full_visit(1, BEFORE, (1,)))

    (oven,) = [log for log in logs(run) if log.name == "oven_temperature"]
    assert oven.values.tolist() == [22.1, 30.0, 22.1]


def test_every_quantity_of_every_role_has_its_log() -> None:
    said = {(role, key) for role, values in conditions(0.0).items() for key in values}

    found = {(log.role, log.quantity) for log in logs(FULL_BENCH.run())}

    assert found == {(role, quantity_and_units(key)[0]) for role, key in said}


def test_a_run_without_conditions_has_no_log() -> None:
    assert logs(run_of()) == ()
    assert said_roles(run_of()) == ()


def test_roles_that_spoke_are_known_once_each() -> None:
    assert said_roles(FULL_BENCH.run()) == ("oven", "diode", "diode tec")
