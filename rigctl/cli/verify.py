"""`polrig verify`: whether a run file is whole and unchanged."""

from rigctl.cli.options import AsJson, RunPath

NAME = "verify"


def command(file: RunPath, as_json: AsJson = False) -> int:
    """Tell whether a run file is whole and unchanged.

    Recomputes the digest of the measured data and compares it with the one stored when the run was closed.
    """
    from rigctl.cli.console import say, say_json
    from rigctl.errors import DamagedFileError
    from rigctl.record import verify_run

    found = verify_run(file)
    if as_json:
        say_json({"file": str(file), "is_whole": found.is_whole, "findings": list(found.findings())})
    else:
        say(f"{file}: whole and unchanged" if found.is_whole else f"{file}: NOT as it was closed")
        for finding in found.findings():
            say(f"  {finding}")
    return 0 if found.is_whole else DamagedFileError.exit_code
