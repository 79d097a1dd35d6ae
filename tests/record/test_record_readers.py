"""The round-trip matrix: a run in every state, read by every reader."""

import subprocess
import sys
from collections.abc import Iterator
from datetime import UTC
from pathlib import Path

import h5py
import numpy as np
import pytest
from numpy.testing import assert_array_equal
from record_cases import HEADER, START, STATES, STATUS, records, write

from rigctl.record import Run, load_run
from rigctl.record.table import Table, dark_table, step_table

NXCHECK = Path(sys.executable).with_name("nxcheck")
NXVALIDATE = Path(sys.executable).with_name("nxvalidate")
GROUPS = {"plate": "plate", "empty pair": "empty_pair"}


def expected_run() -> Run:
    """What every file was made of."""
    run = Run(HEADER, is_live=False)
    for record in records():
        run.keep(record, run.parse(record))
    return run


def tables() -> Iterator[tuple[str, Table]]:
    """Each group's name and what it must hold."""
    for step, group in GROUPS.items():
        yield group, step_table(expected_run(), step)
    yield "darks", dark_table(expected_run())


@pytest.fixture(params=STATES)
def path(request: pytest.FixtureRequest, tmp_path: Path) -> Path:
    """A run file in each state, just as it lies on the disk."""
    path = tmp_path / "night.h5"
    STATES[request.param](path)
    return path


@pytest.fixture(params=STATES)
def state(request: pytest.FixtureRequest) -> str:
    """The name of a state."""
    return str(request.param)


def test_h5py_finds_every_value_by_the_default_chain(path: Path) -> None:
    with h5py.File(path, "r") as file:
        data = file[file.attrs["default"]]
        data = data[data.attrs["default"]]

        assert data.name == "/entry/plate"
        assert list(data.attrs["axes"]) == ["part_mount_angle"]
        assert list(data.attrs["auxiliary_signals"]) == ["reference_monitor"]
        assert_array_equal(data[data.attrs["signal"]], step_table(expected_run(), "plate")["signal"])


def test_every_dimension_has_its_scale_so_that_no_reader_has_to_guess_by_length(path: Path) -> None:
    with h5py.File(path, "r") as file:
        for group, table in tables():
            for variable in table.variables:
                dims = file["entry"][group][variable.name].dims
                assert [dim[0].name.rpartition("/")[2] for dim in dims] == list(variable.dims)
            for scale in (*table.axes, *table.scales):
                assert file["entry"][group][scale.name].is_scale


def test_what_was_not_measured_is_declared_as_such_to_netcdf_and_hdf5(path: Path) -> None:
    with h5py.File(path, "r") as file:
        signal, axis = file["/entry/plate/signal"], file["/entry/plate/part_mount_angle"]

        assert np.isnan(signal.attrs["_FillValue"]).all()
        assert np.isnan(signal.fillvalue)
        assert "_FillValue" not in axis.attrs


@pytest.mark.parametrize("engine", ["h5netcdf", "netcdf4"])
def test_xarray_opens_every_step_with_named_dimensions_units_and_times(path: Path, engine: str) -> None:
    import xarray

    for group, table in tables():
        with xarray.open_dataset(path, group=f"entry/{group}", engine=engine) as data:
            for variable in table.variables:
                assert data[variable.name].dims == variable.dims
                if variable.name != "time":
                    assert_array_equal(data[variable.name].values, variable.values)
            for axis in table.axes:
                assert_array_equal(data.coords[axis.name].values, axis.values)
            assert data["signal"].attrs["units"] == "W"


@pytest.mark.parametrize("engine", ["h5netcdf", "netcdf4"])
def test_xarray_decodes_the_times_to_instants_in_utc(path: Path, engine: str) -> None:
    import xarray

    begun = np.datetime64(START.astimezone(UTC).replace(tzinfo=None), "ns")
    for group, table in tables():
        with xarray.open_dataset(path, group=f"entry/{group}", engine=engine) as data:
            seconds = (data["time"].values - begun) / np.timedelta64(1, "s")

            np.testing.assert_allclose(seconds, table["time"], atol=1e-6)


def test_netcdf4_opens_the_whole_tree(path: Path) -> None:
    import netCDF4

    with netCDF4.Dataset(path) as file:
        for group, table in tables():
            for variable in table.variables:
                found = file["entry"][group][variable.name]
                assert found.dimensions == variable.dims
                assert_array_equal(np.ma.filled(found[...].astype(float), np.nan), variable.values)


def test_a_data_frame_of_a_step_has_a_row_a_visit(path: Path) -> None:
    import xarray

    with xarray.open_dataset(path, group="entry/empty_pair") as data:
        frame = data[["signal", "status", "time"]].to_dataframe()

    assert frame.index.names == ["analyser_angle", "part_mount_angle"]
    assert len(frame.dropna()) == 1


def test_the_nexus_checker_finds_nothing_to_warn_of(path: Path) -> None:
    done = subprocess.run([NXCHECK, "-w", path], capture_output=True, text=True, check=True)

    assert "Total number of warnings: 0" in done.stdout + done.stderr
    assert "Total number of errors: 0" in done.stdout + done.stderr


def test_the_nexus_validator_finds_nothing_but_that_no_application_definition_is_claimed(path: Path) -> None:
    done = subprocess.run([NXVALIDATE, "-w", path], capture_output=True, text=True, check=True)

    said = [line for line in (done.stdout + done.stderr).splitlines() if "in" in line]
    assert len(said) == 1
    assert "No application definition" in said[0]


def test_nexusformat_finds_the_default_plot_with_its_uncertainties(path: Path) -> None:
    done = subprocess.run(
        [
            sys.executable,
            "-c",
            "import sys; from nexusformat.nexus import nxload\n"
            "data = nxload(sys.argv[1]).get_default()\n"
            "found = [data.nxsignal, data.nxerrors, *data.nxaxes]\n"
            "print(data.nxpath, *[item.nxname for item in found])",
            path,
        ],
        capture_output=True,
        text=True,
        check=True,
    )

    assert done.stdout.split() == ["/entry/plate", "signal", "signal_errors", "part_mount_angle"]


def test_polrig_reads_back_every_record_with_its_status(state: str, tmp_path: Path) -> None:
    path = tmp_path / "night.h5"
    STATES[state](path)

    run = load_run(path)

    assert run.header == HEADER
    assert [record for record in run.records if record["kind"] not in ("header", "end")] == records()
    assert run.status == STATUS[state]
    assert not run.is_live
    assert run.attempts == expected_run().attempts
    assert run.darks == expected_run().darks


def test_a_file_read_twice_says_the_same(state: str, tmp_path: Path) -> None:
    path = tmp_path / "night.h5"
    STATES[state](path)

    first, second = load_run(path), load_run(path)

    assert first.records == second.records
    assert first.status == second.status


def test_reading_leaves_one_file(state: str, tmp_path: Path) -> None:
    path = tmp_path / "night.h5"
    STATES[state](path)

    load_run(path)

    assert [entry.name for entry in tmp_path.iterdir()] == ["night.h5"]


def test_values_of_a_live_file_are_those_at_its_last_view(tmp_path: Path) -> None:
    path = tmp_path / "night.h5"

    with write(path, durable=True) as writer, h5py.File(path, "r") as skeleton:
        writer.view()

        assert np.isnan(skeleton["/entry/plate/signal"]).all()
        with h5py.File(path, "r") as view:
            assert_array_equal(view["/entry/plate/signal"], step_table(expected_run(), "plate")["signal"])
