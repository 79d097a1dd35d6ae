"""The command line: the only place that prints, asks and decides exit codes.

One module a command; each imports what is heavy inside its function, so that `polrig --help` stays quick.
"""

import sys
from collections.abc import Sequence

import typer

from rigctl import __version__
from rigctl.cli import check, fit, rehearse, run, schema, simulate, verify
from rigctl.cli.console import complain, complain_of_bug
from rigctl.errors import PolrigError, UsageError

BUG = 70
"""Exit code of a bug in polrig (EX_SOFTWARE of sysexits.h)."""

app = typer.Typer(
    name="polrig",
    help="Rehearse, run and fit unattended angle sweeps of polarizing optics.",
    add_completion=False,
    rich_markup_mode=None,
    pretty_exceptions_enable=False,
)


def _show_version(is_wanted: bool) -> None:
    if is_wanted:
        typer.echo(f"polrig {__version__}")
        raise typer.Exit


@app.callback()
def _options(
    version: bool = typer.Option(
        False, "--version", callback=_show_version, is_eager=True, help="Print the version and leave."
    ),
) -> None:
    """Rehearse, run and fit unattended angle sweeps of polarizing optics."""


for _command in (check, rehearse, run, simulate, fit, verify, schema):
    app.command(_command.NAME)(_command.command)


def run_command(arguments: Sequence[str] | None = None) -> int:
    """Run one command line and return its exit code; an expected error is told without a traceback.

    Without any argument the help is shown, and the exit code is that of a wrong command line.
    """
    given = list(sys.argv[1:] if arguments is None else arguments)
    try:
        code = app(args=given or ["--help"], standalone_mode=False)
    except typer.TyperException as error:
        complain(f"polrig: {error.format_message()}\n  `polrig COMMAND --help` tells what a command takes.")
        return UsageError.exit_code
    except PolrigError as error:
        complain(str(error))
        return error.exit_code
    except Exception as error:  # noqa: BLE001  # a bug always shows its traceback
        complain_of_bug(error)
        return BUG
    if not given:
        return UsageError.exit_code
    return code if isinstance(code, int) else 0


def main() -> None:
    """Entry point of the `polrig` command."""
    sys.exit(run_command())
