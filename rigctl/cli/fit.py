"""`polrig fit`: estimates with uncertainties, from a run file."""

from rigctl.cli.options import AsJson, RunPath

NAME = "fit"


def command(file: RunPath, as_json: AsJson = False) -> int:
    """Estimate the unknowns from a run file."""
    from rigctl.cli.console import complain, say, say_json
    from rigctl.cli.show import fit_as_dict, fit_lines
    from rigctl.errors import UndecidedError
    from rigctl.estimates import asks_for_anything, fit_run, truth_of
    from rigctl.record import load_run

    run = load_run(file)
    if run.status != "complete":
        complain(f"note: the run is {run.status}; this is what it measured so far")
    if not asks_for_anything(run):
        raise UndecidedError("its recipe calls nothing unknown", where=str(file), do="The readings are in the file.")
    fitted = fit_run(run)
    if as_json:
        say_json({"file": str(file), "status": run.status, "fit": fit_as_dict(fitted, truth_of(run))})
    else:
        for line in fit_lines(fitted, truth_of(run)):
            say(line)
    return UndecidedError.exit_code if fitted.refusals else 0
