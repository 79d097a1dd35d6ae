"""Commands that send nothing, or talk to the simulated bench only."""

import json
import os
import resource
import signal
import subprocess
from pathlib import Path

import pytest
from cli_cases import COMMAND, RECIPE, RIG, polrig

from rigctl.record import load_run

NO_DARK = RECIPE.replace("dark: {by: shutter, before: true, after: true}\n", "")


@pytest.fixture
def recipe(tmp_path: Path) -> Path:
    path = tmp_path / "recipe.yaml"
    path.write_text(RECIPE, encoding="utf-8")
    return path


def test_rehearse_says_where_the_run_file_is_and_prints_the_fit_beside_the_truth(recipe: Path, tmp_path: Path) -> None:
    done = polrig("rehearse", recipe, "--out", tmp_path / "run.h5")

    assert done.returncode == 0, done.stderr
    assert f"run file: {tmp_path / 'run.h5'}" in done.stdout
    assert "part.dial offset" in done.stdout
    assert "truth" in done.stdout


def test_out_may_be_a_folder_and_names_never_collide(recipe: Path, tmp_path: Path) -> None:
    for _ in range(2):
        assert polrig("rehearse", recipe, "--out", tmp_path).returncode == 0

    assert sorted(path.name for path in tmp_path.glob("*.h5")) == [
        "recipe-rehearsal-1-2.h5",
        "recipe-rehearsal-1.h5",
    ]


def test_an_existing_out_is_refused_with_exit_code_2(recipe: Path, tmp_path: Path) -> None:
    (tmp_path / "run.h5").write_bytes(b"precious")

    done = polrig("rehearse", recipe, "--out", tmp_path / "run.h5")

    assert done.returncode == 2
    assert (tmp_path / "run.h5").read_bytes() == b"precious"


def test_every_mistake_of_a_recipe_is_told_at_once_with_its_place(recipe: Path) -> None:
    recipe.write_text(RECIPE.replace("sweep:", "swep:").replace("100 ms", "100 mW"), encoding="utf-8")

    done = polrig("check", recipe)

    assert done.returncode == 2
    assert f"{recipe}:9:1:" in done.stderr
    assert "did you mean 'sweep'" in done.stderr
    assert f"{recipe}:10:15:" in done.stderr


def test_check_predicts_duration_and_uncertainty(recipe: Path) -> None:
    done = polrig("check", recipe, "--json")

    (answer,) = json.loads(done.stdout)["rigs"]
    predicted = {e["name"]: e["u"] for e in answer["predicted"]["estimates"]}
    assert answer["visits"] == 12
    assert 0.0 < predicted["part.dial offset"] < 1.0


def test_check_against_several_rigs_answers_for_each(recipe: Path, tmp_path: Path) -> None:
    for name in ("one", "two"):
        (tmp_path / f"{name}.yaml").write_text(RIG.replace("rig: bench", f"rig: {name}"), encoding="utf-8")

    done = polrig("check", recipe, "--rig", tmp_path / "one.yaml", "--rig", tmp_path / "two.yaml")

    assert done.stdout.count("nothing wrong") == 2


def test_an_extinction_ratio_without_a_dark_is_refused_and_the_cure_named(tmp_path: Path) -> None:
    recipe = tmp_path / "recipe.yaml"
    recipe.write_text(NO_DARK, encoding="utf-8")
    polrig("rehearse", recipe, "--out", tmp_path / "run.h5")

    done = polrig("fit", tmp_path / "run.h5")
    answer = json.loads(polrig("fit", tmp_path / "run.h5", "--json").stdout)["fit"]

    assert done.returncode == 8
    assert "beam blocked" in done.stdout
    assert [refusal["names"] for refusal in answer["refusals"]] == [["part.extinction ratio"]]
    assert "part.dial offset" in {estimate["name"] for estimate in answer["estimates"]}


def test_verify_tells_a_changed_file_with_exit_code_9(recipe: Path, tmp_path: Path) -> None:
    import h5py

    path = tmp_path / "run.h5"
    polrig("rehearse", recipe, "--out", path)
    assert polrig("verify", path).returncode == 0
    with h5py.File(path, "r+") as file:
        file["entry/data/signal"][3] *= 1.001

    done = polrig("verify", path)

    assert done.returncode == 9
    assert "entry/data/signal" in done.stdout


@pytest.mark.parametrize("command", ["fit", "verify"])
@pytest.mark.parametrize("content", [None, b"", b"no HDF5", b"\x89HDF\r\n\x1a\n" + b"\0" * 500])
def test_what_is_no_run_file_is_told_in_a_sentence(command: str, content: bytes | None, tmp_path: Path) -> None:
    path = tmp_path / "what.h5"
    if content is not None:
        path.write_bytes(content)

    done = polrig(command, path)

    assert done.returncode in (2, 5, 9)
    assert "what.h5" in done.stderr
    assert "Traceback" not in done.stderr


@pytest.mark.parametrize(("most_bytes", "status"), [(8_000, "recovered"), (12_000, "complete")])
def test_a_disk_that_takes_no_more_is_exit_code_5_with_the_journal_kept(
    recipe: Path, tmp_path: Path, most_bytes: int, status: str
) -> None:
    """A limit on the size of files stands for a full disk: writes beyond it fail as they do there."""

    def limited() -> None:
        signal.signal(signal.SIGXFSZ, signal.SIG_IGN)
        resource.setrlimit(resource.RLIMIT_FSIZE, (most_bytes, most_bytes))

    done = subprocess.run(
        [*COMMAND, "rehearse", str(recipe), "--out", str(tmp_path / "run.h5")],
        capture_output=True, text=True, check=False, preexec_fn=limited, timeout=60,
    )  # fmt: skip

    assert done.returncode == 5, done.stderr
    assert "Traceback" not in done.stderr
    assert (tmp_path / "run.h5.journal").exists()
    assert load_run(tmp_path / "run.h5").status == status


def test_output_to_a_closed_pipe_does_not_end_a_rehearsal(recipe: Path, tmp_path: Path) -> None:
    reading, writing = os.pipe()
    os.close(reading)

    done = subprocess.run(
        [*COMMAND, "rehearse", str(recipe), "--out", str(tmp_path / "run.h5")],
        stdout=writing, stderr=writing, check=False, timeout=60,
    )  # fmt: skip
    os.close(writing)

    assert done.returncode == 0
    assert load_run(tmp_path / "run.h5").status == "complete"
