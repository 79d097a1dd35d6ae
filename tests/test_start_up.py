import subprocess
import sys
from importlib.util import find_spec
from pathlib import Path

import pytest

import rigctl

ROOT = Path(__file__).resolve().parent.parent
HEAVY = ("numpy", "scipy", "h5py")


def run(*arguments: str) -> subprocess.CompletedProcess[str]:
    return subprocess.run([sys.executable, *arguments], capture_output=True, text=True, check=False, timeout=60)


@pytest.mark.parametrize("command", [[], ["rehearse"], ["run"], ["fit"], ["check"], ["simulate"], ["verify"]])
def test_help_imports_nothing_heavy(command: list[str]) -> None:
    done = run("-X", "importtime", "-m", "rigctl", *command, "--help")

    assert done.returncode == 0
    imported = {line.rsplit("|", 1)[-1].strip().split(".")[0] for line in done.stderr.splitlines()}
    assert "typer" in imported
    assert not imported & set(HEAVY)


def test_the_version_is_the_package_s() -> None:
    done = run("-m", "rigctl", "--version")

    assert done.stdout == f"polrig {rigctl.__version__}\n"


def test_public_names_are_what_is_there() -> None:
    assert len(rigctl.__all__) <= 20
    for name in rigctl.__all__:
        assert hasattr(rigctl, name)


@pytest.mark.parametrize("folder", ["drivers", "simulators", "recipes"])
def test_source_folders_are_no_packages_themselves(folder: str) -> None:
    assert not (ROOT / folder / "__init__.py").exists()
    spec = find_spec(folder)
    assert spec is None or spec.origin is None


@pytest.mark.parametrize("package", ["rigctl", "drivers/rigctl_drivers", "simulators/rigctl_sim"])
def test_every_package_says_that_it_is_typed(package: str) -> None:
    assert (ROOT / package / "py.typed").exists()


def test_a_misspelt_command_is_told_in_two_lines_with_exit_code_2() -> None:
    done = run("-m", "rigctl", "reherse")

    assert done.returncode == 2
    assert "reherse" in done.stderr
    assert "Traceback" not in done.stderr
