"""Tells how a run or rehearsal ended, and fits what it recorded."""

from typing import TYPE_CHECKING, Any

from rigctl.cli.console import complain, complain_of_bug, duration, say, say_json
from rigctl.cli.show import fit_as_dict, fit_lines
from rigctl.errors import NotSafeError, PolrigError, UndecidedError

if TYPE_CHECKING:
    from rigctl.runner.run import Job, Outcome


def tell_outcome(job: "Job", outcome: "Outcome", lead: str, *, as_json: bool) -> int:
    """Print where the run file is, how it ended, and the fit; return the exit code."""
    from rigctl.estimates import asks_for_anything, truth_of
    from rigctl.record import load_run

    _complain_about(outcome)  # before anything that may fail: the beam may be on
    try:
        run = load_run(job.path)
    except PolrigError as error:
        complain(str(error))
        return outcome.exit_code or error.exit_code
    answer: dict[str, Any] = {
        "file": str(job.path),
        "status": run.status,
        "exit_code": outcome.exit_code,
        "why": outcome.why,
        "visits": sum(len(run.visits(step.name)) for step in run.header.steps),
        "duration_s": run.duration_s,
    }
    if not as_json:
        say(lead)
        say(f"run file: {job.path}  ({answer['visits']} visits, {duration(run.duration_s)}, {run.status})")
    fitted, code = _fit(run, outcome.exit_code) if asks_for_anything(run) else (None, outcome.exit_code)
    answer["exit_code"] = code
    if as_json:
        say_json(answer | ({"fit": fit_as_dict(fitted, truth_of(run))} if fitted else {}))
    elif fitted:
        say("")
        for line in fit_lines(fitted, truth_of(run)):
            say(line)
    return code


def _complain_about(outcome: "Outcome") -> None:
    for step in outcome.safe_steps:
        if not step.is_confirmed:
            complain(f"'{step.role}' could not be confirmed {step.wanted}: {step.trouble}")
    if outcome.exit_code == NotSafeError.exit_code:
        complain("THE BEAM COULD NOT BE CONFIRMED BLOCKED. Treat it as on: go and look.")
    if outcome.bug is not None:
        complain_of_bug(outcome.bug)
    elif outcome.why:
        complain(outcome.why)


def _fit(run: Any, code: int) -> tuple[Any, int]:
    """Fit what there is; data that decide nothing are told, and count only when the run itself went well."""
    from rigctl.estimates import fit_run

    try:
        return fit_run(run), code
    except UndecidedError as error:
        if code == 0:
            complain(f"no fit: {error}")
        return None, code or error.exit_code
    except PolrigError as error:
        complain(f"no fit: {error}")
        return None, code
