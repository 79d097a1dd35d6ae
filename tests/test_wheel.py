"""The built wheel, in an empty environment away from the checkout."""

import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parent.parent


def run(*arguments: str | Path, cwd: Path) -> subprocess.CompletedProcess[str]:
    return subprocess.run(list(map(str, arguments)), cwd=cwd, capture_output=True, text=True, check=False, timeout=400)


@pytest.mark.soak
def test_the_wheel_rehearses_a_ready_recipe_away_from_the_checkout(tmp_path: Path) -> None:
    """Its dependencies come from the lock; this needs the package index, or a cache of it."""
    built = run(sys.executable, "-m", "hatchling", "build", "-t", "wheel", "-d", tmp_path / "dist", cwd=ROOT)
    assert built.returncode == 0, built.stderr
    (wheel,) = (tmp_path / "dist").glob("*.whl")
    uv = Path(sys.executable).parent / "uv"
    python = tmp_path / "empty" / "bin" / "python"
    assert run(sys.executable, "-m", "venv", tmp_path / "empty", cwd=tmp_path).returncode == 0
    lock = ROOT / "requirements.lock"
    installed = run(uv, "pip", "install", "--python", python, "--constraint", lock, wheel, cwd=tmp_path)
    assert installed.returncode == 0, installed.stderr

    done = run(tmp_path / "empty/bin/polrig", "rehearse", "plate-at-temperatures", "--out", "run.h5", cwd=tmp_path)

    assert done.returncode == 0, done.stderr
    assert "part.retardance @ 25 degC" in done.stdout
    assert (
        run(tmp_path / "empty/bin/polrig", "check", "high-extinction", "--rig", "long-bench", cwd=tmp_path).returncode
        == 0
    )


def test_a_name_that_is_no_ready_recipe_is_told_with_those_that_are(tmp_path: Path) -> None:
    done = run(sys.executable, "-m", "rigctl", "check", "quater-wave-plate", cwd=tmp_path)

    assert done.returncode == 2
    assert "quarter-wave-plate" in done.stderr


def test_ready_recipes_and_rigs_are_found_by_name_from_anywhere(tmp_path: Path) -> None:
    done = run(sys.executable, "-m", "rigctl", "check", "half-wave-plate", "--rig", "attic-bench", cwd=tmp_path)

    assert done.returncode == 0, done.stderr
