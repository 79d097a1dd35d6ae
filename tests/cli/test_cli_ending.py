"""How a run's ending is told: the exit code, the danger first, the fit where there is one."""

import json
from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path

import pytest
from cli_cases import RECIPE, RIG

from rigctl import cli
from rigctl.cli.ending import tell_outcome
from rigctl.errors import InstrumentError
from rigctl.files import match, parse_recipe, parse_rig
from rigctl.plugins import find_bench_factory, find_drivers
from rigctl.record import create_run
from rigctl.runner.progress import Silent
from rigctl.runner.rehearsal import rehearsal_job
from rigctl.runner.run import Job, Outcome, run_job
from rigctl.runner.safe import SafeStep

SAFE = (SafeStep("shutter", "closed"), SafeStep("part mount", "stopped"))
LIT = (SafeStep("shutter", "closed", "no reply in time"), SafeStep("part mount", "stopped"))


@pytest.fixture
def job(tmp_path: Path) -> Iterator[Job]:
    drivers, factory = find_drivers(), find_bench_factory()
    recipe, rig = parse_recipe(RECIPE, "recipe.yaml"), parse_rig(RIG, "rig.yaml", drivers, factory)
    match(recipe, rig, drivers)
    made = rehearsal_job(
        recipe, rig, drivers=drivers, factory=factory, seed=1, path=tmp_path / "run.h5", progress=Silent()
    )
    yield made
    made.timeline.stop.close()


def bug() -> Exception:
    """An exception with a traceback."""
    try:
        raise ZeroDivisionError("a bug in a driver")
    except ZeroDivisionError as error:
        return error


def close_empty(job: Job, status: str) -> None:
    """A run that was closed before its first visit."""
    with create_run(job.path, job.header, durable=False) as writer:
        writer.close(status, t_s=1.0)


def test_a_good_run_tells_its_file_its_length_and_the_fit(job: Job, capsys: pytest.CaptureFixture[str]) -> None:
    code = tell_outcome(job, run_job(job), "rehearsed", as_json=False)

    out, err = capsys.readouterr()
    assert (code, err) == (0, "")
    assert out.startswith(f"rehearsed\nrun file: {job.path}  (12 visits, ")
    assert ", complete)\n\nestimates" in out
    assert "part.dial offset" in out


def test_as_json_a_good_run_is_one_object(job: Job, capsys: pytest.CaptureFixture[str]) -> None:
    code = tell_outcome(job, run_job(job), "rehearsed", as_json=True)

    answer = json.loads(capsys.readouterr().out)
    assert (code, answer["exit_code"], answer["status"], answer["visits"]) == (0, 0, "complete", 12)
    assert answer["file"] == str(job.path)
    assert answer["duration_s"] == pytest.approx(job.timeline.now())
    assert {estimate["name"] for estimate in answer["fit"]["estimates"]} >= {"part.extinction ratio"}
    assert all("truth" in estimate for estimate in answer["fit"]["estimates"])


def test_a_beam_that_may_be_on_is_told_in_capitals_with_exit_code_7(
    job: Job, capsys: pytest.CaptureFixture[str]
) -> None:
    outcome = replace(run_job(job), exit_code=7, safe_steps=LIT)

    code = tell_outcome(job, outcome, "ran", as_json=False)

    err = capsys.readouterr().err
    assert code == 7
    assert "'shutter' could not be confirmed closed: no reply in time" in err
    assert "THE BEAM COULD NOT BE CONFIRMED BLOCKED" in err
    assert "part mount" not in err


def test_a_bug_shows_its_traceback_after_the_fit_of_what_was_measured(
    job: Job, capsys: pytest.CaptureFixture[str]
) -> None:
    run_job(job)

    code = tell_outcome(job, Outcome("failed", 70, "ZeroDivisionError: a bug", SAFE, bug()), "ran", as_json=False)

    out, err = capsys.readouterr()
    assert code == 70
    assert "Traceback" in err
    assert "ZeroDivisionError: a bug in a driver" in err
    assert "report it" in err
    assert "part.dial offset" in out


def test_a_beam_that_may_be_on_outweighs_the_bug_that_left_it_so(job: Job, capsys: pytest.CaptureFixture[str]) -> None:
    run_job(job)

    code = tell_outcome(job, Outcome("failed", 7, "ZeroDivisionError", LIT, bug()), "ran", as_json=True)

    out, err = capsys.readouterr()
    assert code == json.loads(out)["exit_code"] == 7
    assert "THE BEAM" in err
    assert "Traceback" in err


@pytest.mark.parametrize("exit_code", [5, 7])
def test_a_file_that_cannot_be_read_back_hides_neither_the_danger_nor_the_exit_code(
    exit_code: int, job: Job, capsys: pytest.CaptureFixture[str]
) -> None:
    job.path.write_bytes(b"no run file")

    code = tell_outcome(job, Outcome("failed", exit_code, "the disk is full", LIT), "ran", as_json=False)

    err = capsys.readouterr().err
    assert code == exit_code
    assert ("THE BEAM" in err) == (exit_code == 7)
    assert "'shutter' could not be confirmed closed" in err
    assert "run.h5" in err


def test_why_a_run_ended_is_told_without_a_traceback(job: Job, capsys: pytest.CaptureFixture[str]) -> None:
    run_job(job)

    code = tell_outcome(job, Outcome("stopped", 6, "stopped by SIGINT", SAFE), "ran", as_json=False)

    assert code == 6
    assert capsys.readouterr().err == "stopped by SIGINT\n"


@pytest.mark.parametrize(("status", "exit_code", "expected"), [("complete", 0, 8), ("stopped", 6, 6), ("failed", 3, 3)])
def test_a_run_without_a_visit_is_undecided_unless_it_ended_worse(
    status: str, exit_code: int, expected: int, job: Job, capsys: pytest.CaptureFixture[str]
) -> None:
    close_empty(job, status)

    code = tell_outcome(job, Outcome(status, exit_code, "", SAFE), "ran", as_json=True)

    out, err = capsys.readouterr()
    answer = json.loads(out)
    assert code == answer["exit_code"] == expected
    assert (answer["visits"], "fit" in answer) == (0, False)
    assert ("no visit was completed" in err) == (exit_code == 0)


class Named:
    """Stands for a command of the command line."""

    def __init__(self, error: Exception) -> None:
        self.error = error

    def __call__(self, **_options: object) -> int:
        raise self.error


def test_an_expected_error_of_a_command_is_told_with_its_own_exit_code(
    monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.setattr(cli, "app", Named(InstrumentError("it is silent", where="head 1", do="Look at it.")))

    assert cli.run_command(["run"]) == 3

    assert capsys.readouterr().err == "head 1: it is silent\n  Look at it.\n"


def test_a_bug_in_a_command_is_exit_code_70_with_its_traceback(
    monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.setattr(cli, "app", Named(ZeroDivisionError("a bug")))

    assert cli.run_command(["run"]) == 70

    err = capsys.readouterr().err
    assert "Traceback" in err
    assert "ZeroDivisionError: a bug" in err


@pytest.mark.parametrize("arguments", [["rehearse"], ["fit", "a.h5", "--jsn"], ["check", "a.yaml", "--rig"]])
def test_a_command_line_that_is_wrong_is_exit_code_2_with_a_way_to_help(
    arguments: list[str], capsys: pytest.CaptureFixture[str]
) -> None:
    assert cli.run_command(arguments) == 2

    err = capsys.readouterr().err
    assert err.startswith("polrig: ")
    assert "--help" in err
    assert "Traceback" not in err
