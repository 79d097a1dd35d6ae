"""What importing the record costs, and who knows HDF5."""

import re
import subprocess
import sys
from pathlib import Path

import rigctl.record

ROOT = Path(rigctl.record.__file__).parents[2]


def test_importing_the_record_loads_neither_numpy_nor_hdf5() -> None:
    done = subprocess.run(
        [sys.executable, "-c", "import sys, rigctl.record; print(*{'numpy', 'h5py'} & set(sys.modules))"],
        capture_output=True,
        text=True,
        check=True,
    )

    assert done.stdout.split() == []


def test_nothing_but_the_record_imports_hdf5() -> None:
    sources = [
        path
        for package in ("rigctl", "drivers/rigctl_drivers", "simulators/rigctl_sim")
        for path in (ROOT / package).rglob("*.py")
    ]

    importing = {path.parent for path in sources if re.search(r"^\s*(import|from) h5py", path.read_text(), re.M)}

    assert importing == {ROOT / "rigctl" / "record"}


def test_the_public_names_are_those_that_are_there() -> None:
    assert sorted(rigctl.record.__all__) == rigctl.record.__all__
    assert all(hasattr(rigctl.record, name) for name in rigctl.record.__all__)
