"""`polrig verify`: whether a run file is whole and unchanged."""

from rigctl.cli.options import AsJson, RunPath

NAME = "verify"


def command(file: RunPath, as_json: AsJson = False) -> int:
    """Recompute the digest of the measured data and compare it with the one stored when the run was closed."""
    from rigctl.cli.console import say, say_json
    from rigctl.errors import DamagedFileError
    from rigctl.record import verify_run

    found = verify_run(file)
    if as_json:
        say_json({"file": str(file), "is_whole": found.is_whole, "troubles": list(found.troubles)})
    else:
        say(f"{file}: whole and unchanged" if found.is_whole else f"{file}: NOT as it was closed")
        for trouble in found.troubles:
            say(f"  {trouble}")
    return 0 if found.is_whole else DamagedFileError.exit_code
