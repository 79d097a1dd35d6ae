"""The round-trip matrix: a run in every state, read by every reader."""

import subprocess
import sys
from collections.abc import Iterator
from dataclasses import dataclass
from datetime import UTC
from pathlib import Path

import h5py
import numpy as np
import pytest
from full_bench_cases import FULL_BENCH
from numpy.testing import assert_array_equal
from record_cases import START, STATES, STATUS, TWO_STEPS, Case, finished, write

from rigctl.record import load_run
from rigctl.record.conditions import logs
from rigctl.record.table import Table, dark_table, step_table

NXCHECK = Path(sys.executable).with_name("nxcheck")
NXVALIDATE = Path(sys.executable).with_name("nxvalidate")
CASES = {"two steps": TWO_STEPS, "full bench": FULL_BENCH}
MATRIX = [
    *(("two steps", state) for state in STATES),
    *(("full bench", state) for state in ("finished", "killed", "recovered")),
]


@dataclass(frozen=True)
class Made:
    """A run file in one of its states, just as it lies on the disk."""

    path: Path
    case: Case
    state: str


@pytest.fixture(params=MATRIX, ids=" ".join)
def made(request: pytest.FixtureRequest, tmp_path: Path) -> Made:
    """Each case in each state."""
    name, state = request.param
    STATES[state](tmp_path / "night.h5", CASES[name])
    return Made(tmp_path / "night.h5", CASES[name], state)


def tables(case: Case) -> Iterator[tuple[str, Table]]:
    """Each group's name and what it must hold."""
    for step, group in case.groups.items():
        yield group, step_table(case.run(), step)
    yield "darks", dark_table(case.run())


def test_h5py_finds_every_value_by_the_default_chain(made: Made) -> None:
    header = made.case.header
    with h5py.File(made.path, "r") as file:
        data = file[file.attrs["default"]]
        data = data[data.attrs["default"]]

        assert data.name == f"/entry/{made.case.groups[header.steps[0].name]}"
        assert list(data.attrs["axes"]) == [axis.name for axis in header.steps[0].axes]
        assert list(data.attrs["auxiliary_signals"]) == [header.detectors[1].replace(" ", "_")]
        assert_array_equal(data[data.attrs["signal"]], step_table(made.case.run(), header.steps[0].name)["signal"])


def test_every_dimension_has_its_scale_so_that_no_reader_has_to_guess_by_length(made: Made) -> None:
    with h5py.File(made.path, "r") as file:
        for group, table in tables(made.case):
            for variable in table.variables:
                dims = file["entry"][group][variable.name].dims
                assert [dim[0].name.rpartition("/")[2] for dim in dims] == list(variable.dims)
            for scale in (*table.axes, *table.scales):
                assert file["entry"][group][scale.name].is_scale


def test_what_was_not_measured_is_declared_as_such_to_netcdf_and_hdf5(made: Made) -> None:
    with h5py.File(made.path, "r") as file:
        signal, axis = file["/entry/plate/signal_corrected"], file["/entry/plate/part_mount_angle"]

        assert np.isnan(signal.attrs["_FillValue"]).all()
        assert np.isnan(signal.fillvalue)
        assert "_FillValue" not in axis.attrs


@pytest.mark.parametrize("engine", ["h5netcdf", "netcdf4"])
def test_xarray_opens_every_step_with_named_dimensions_units_and_times(made: Made, engine: str) -> None:
    import xarray

    for group, table in tables(made.case):
        with xarray.open_dataset(made.path, group=f"entry/{group}", engine=engine) as data:
            for variable in table.variables:
                assert data[variable.name].dims == variable.dims
                if variable.name != "time":
                    assert_array_equal(data[variable.name].values, variable.values)
            for axis in table.axes:
                assert_array_equal(data.coords[axis.name].values, axis.values)
            assert data["signal"].attrs["units"] == "W"


@pytest.mark.parametrize("engine", ["h5netcdf", "netcdf4"])
def test_xarray_decodes_the_times_to_instants_in_utc(made: Made, engine: str) -> None:
    import xarray

    begun = np.datetime64(START.astimezone(UTC).replace(tzinfo=None), "ns")
    for group, table in tables(made.case):
        with xarray.open_dataset(made.path, group=f"entry/{group}", engine=engine) as data:
            seconds = (data["time"].values - begun) / np.timedelta64(1, "s")

            np.testing.assert_allclose(seconds, table["time"], atol=1e-6)


def test_netcdf4_opens_the_whole_tree(made: Made) -> None:
    import netCDF4

    with netCDF4.Dataset(made.path) as file:
        for group, table in tables(made.case):
            for variable in table.variables:
                found = file["entry"][group][variable.name]
                assert found.dimensions == variable.dims
                assert_array_equal(np.ma.filled(found[...].astype(float), np.nan), variable.values)


@pytest.mark.parametrize("engine", ["h5netcdf", "netcdf4"])
def test_xarray_opens_the_log_of_every_condition(tmp_path: Path, engine: str) -> None:
    import xarray

    STATES["recovered"](tmp_path / "night.h5", FULL_BENCH)

    for log in logs(FULL_BENCH.run()):
        with xarray.open_dataset(
            tmp_path / "night.h5", group=f"entry/environment/logs/{log.name}", engine=engine
        ) as data:
            assert_array_equal(data["time"].values, log.times_s)
            assert_array_equal(data["value"].values, log.values)
            assert data["value"].attrs["units"] == log.units


def test_an_axis_that_goes_there_and_back_opens_with_each_value_twice(tmp_path: Path) -> None:
    import xarray

    finished(tmp_path / "night.h5", FULL_BENCH)

    with xarray.open_dataset(tmp_path / "night.h5", group="entry/pair_shuffled") as data:
        there_and_back = data["signal"].sel(exit_mount_angle=20.0, repeat=2.0)

    assert data["exit_mount_angle"].values.tolist() == [0.0, 20.0, 40.0, 20.0, 0.0]
    assert np.isfinite(there_and_back.values).tolist() == [True, True]


@pytest.mark.parametrize(
    ("group", "names"),
    [
        ("plate", ["oven_temperature", "exit_mount_angle", "part_mount_angle"]),
        ("light_against_current", ["diode_tec_temperature", "diode_current"]),
    ],
)
def test_a_data_frame_of_a_step_has_a_row_a_visit(tmp_path: Path, group: str, names: list[str]) -> None:
    import xarray

    finished(tmp_path / "night.h5", FULL_BENCH)

    with xarray.open_dataset(tmp_path / "night.h5", group=f"entry/{group}") as data:
        frame = data[["signal", "status", "time"]].to_dataframe()

    assert frame.index.names == names
    assert len(frame.dropna()) == sum(visit.step.replace(" ", "_") == group for visit in FULL_BENCH.run().attempts)


def test_the_nexus_checker_finds_nothing_to_warn_of(made: Made) -> None:
    done = subprocess.run([NXCHECK, "-w", made.path], capture_output=True, text=True, check=True)

    assert "Total number of warnings: 0" in done.stdout + done.stderr
    assert "Total number of errors: 0" in done.stdout + done.stderr


def test_the_nexus_validator_finds_nothing_but_that_no_application_definition_is_claimed(made: Made) -> None:
    done = subprocess.run([NXVALIDATE, "-w", made.path], capture_output=True, text=True, check=True)

    said = [line for line in (done.stdout + done.stderr).splitlines() if "in" in line]
    assert len(said) == 1
    assert "No application definition" in said[0]


def test_nexusformat_finds_the_default_plot_with_its_uncertainties(made: Made) -> None:
    done = subprocess.run(
        [
            sys.executable,
            "-c",
            "import sys; from nexusformat.nexus import nxload\n"
            "data = nxload(sys.argv[1]).get_default()\n"
            "found = [data.nxsignal, data.nxerrors, *data.nxaxes]\n"
            "print(data.nxpath, *[item.nxname for item in found])",
            made.path,
        ],
        capture_output=True,
        text=True,
        check=True,
    )

    step = made.case.header.steps[0]
    expected = [f"/entry/{made.case.groups[step.name]}", "signal", "signal_errors", step.axes[0].name]
    assert done.stdout.split() == expected


def test_polrig_reads_back_every_record_with_its_status(made: Made) -> None:
    run, expected = load_run(made.path), made.case.run()

    assert run.header == made.case.header
    assert [record for record in run.records if record["kind"] not in ("header", "end")] == made.case.records()
    assert run.status == STATUS[made.state]
    assert not run.is_live
    # as text, since a condition that was not a number is unlike itself
    assert repr(run.attempts) == repr(expected.attempts)
    assert run.darks == expected.darks


def test_a_file_read_twice_says_the_same(made: Made) -> None:
    first, second = load_run(made.path), load_run(made.path)

    assert first.records == second.records
    assert first.status == second.status


def test_reading_leaves_one_file(made: Made) -> None:
    load_run(made.path)

    assert [entry.name for entry in made.path.parent.iterdir()] == ["night.h5"]


def test_values_of_a_live_file_are_those_at_its_last_view(tmp_path: Path) -> None:
    path = tmp_path / "night.h5"

    with write(path, durable=True) as writer, h5py.File(path, "r") as skeleton:
        writer.view()

        assert np.isnan(skeleton["/entry/plate/signal"]).all()
        with h5py.File(path, "r") as view:
            assert_array_equal(view["/entry/plate/signal"], step_table(TWO_STEPS.run(), "plate")["signal"])
