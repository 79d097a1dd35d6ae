"""What every command refuses before it sends, opens or writes anything: limits, and hands where nobody is."""

from pathlib import Path

import pytest

from rigctl.cli import run_command

RECIPES = Path(__file__).resolve().parents[2] / "recipes"
CURVE = (RECIPES / "light-against-current.yaml").read_text(encoding="utf-8")
PLATE = (RECIPES / "plate-at-temperatures.yaml").read_text(encoding="utf-8")
LONG_BENCH = (RECIPES / "rigs/long-bench.yaml").read_text(encoding="utf-8")
WEAK_DIODE = LONG_BENCH.replace("current: 45 mA", "current: 30 mA")
NO_SLIDE = LONG_BENCH.replace("  part slide: slide 1\n", "")


def files(folder: Path, recipe: str, rig: str) -> tuple[str, str]:
    (folder / "recipe.yaml").write_text(recipe, encoding="utf-8")
    (folder / "rig.yaml").write_text(rig, encoding="utf-8")
    return str(folder / "recipe.yaml"), str(folder / "rig.yaml")


@pytest.mark.parametrize("command", ["check", "rehearse", "run"])
def test_a_setpoint_beyond_a_limit_is_exit_code_4_and_no_file(
    command: str, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    recipe, rig = files(tmp_path, CURVE, WEAK_DIODE)
    out = [] if command == "check" else ["--out", str(tmp_path / "run.h5")]

    code = run_command([command, recipe, "--rig", rig, *out, *(["--arm"] if command == "run" else [])])

    told = capsys.readouterr().err
    assert code == 4
    assert "'diode' is to go to 36 mA, beyond 30 mA of the diode 'D-118'" in told
    assert "Nothing was sent" in told
    assert "CAUTION" not in told
    assert sorted(path.name for path in tmp_path.iterdir()) == ["recipe.yaml", "rig.yaml"]


@pytest.mark.parametrize("unattended", ["", "\n    unattended: go on"])
def test_a_step_that_needs_hands_is_exit_code_2_where_nobody_is_unless_every_such_step_may_go_on(
    unattended: str, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    """The step before may go on, the one after may not."""
    recipe, rig = files(tmp_path, PLATE.replace("without: part", f"without: part{unattended}", 1), NO_SLIDE)

    code = run_command(["run", recipe, "--rig", rig, "--arm", "--out", str(tmp_path / "run.h5")])

    told = capsys.readouterr().err
    assert code == 2
    assert f"step 'empty pair {'after' if unattended else 'before'}' needs somebody to take out part" in told
    assert "unattended: go on" in told
    assert not (tmp_path / "run.h5").exists()


def test_a_rehearsal_has_somebody_who_takes_the_part_out(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    recipe, rig = files(tmp_path, PLATE, NO_SLIDE)

    code = run_command(["rehearse", recipe, "--rig", rig, "--out", str(tmp_path / "run.h5"), "--json"])

    assert code == 0, capsys.readouterr().err


def test_a_zero_is_taken_by_hand_and_refused_where_nobody_is(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    recipe, rig = files(tmp_path, PLATE + "zero: {before: true, after: false}\n", LONG_BENCH)

    code = run_command(["run", recipe, "--rig", rig, "--arm", "--out", str(tmp_path / "run.h5")])

    assert code == 2
    assert "taken by hand" in capsys.readouterr().err
    assert not (tmp_path / "run.h5").exists()
