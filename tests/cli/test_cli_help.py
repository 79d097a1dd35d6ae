"""The help: every command, argument and option says what it does, in words of its own."""

from typing import Any

import pytest
import typer

from rigctl.cli import app, run_command

GROUP = typer.main.get_group(app)
COMMANDS = sorted(GROUP.commands)
PARAMETERS: list[tuple[str, Any]] = [
    (name, parameter) for name in COMMANDS for parameter in GROUP.commands[name].params
]


def help_of(name: str, capsys: pytest.CaptureFixture[str]) -> str:
    """Help of a command as one line of words, so that its line breaks do not matter."""
    assert run_command([name, "--help"]) == 0
    return " ".join(capsys.readouterr().out.split())


def test_the_help_of_polrig_lists_every_command_with_a_sentence(capsys: pytest.CaptureFixture[str]) -> None:
    assert run_command(["--help"]) == 0

    lines = [line.split() for line in capsys.readouterr().out.splitlines()]
    for name in COMMANDS:
        (listed,) = (line for line in lines if line[:1] == [name])
        assert len(listed) >= 4, name


def test_a_bare_polrig_shows_its_help_and_is_a_wrong_command_line(capsys: pytest.CaptureFixture[str]) -> None:
    assert run_command([]) == 2

    out, err = capsys.readouterr()
    assert "Usage: " in out
    assert "rehearse" in out
    assert err == ""


@pytest.mark.parametrize("name", COMMANDS)
def test_the_help_of_a_command_begins_with_what_it_does_and_names_every_option(
    name: str, capsys: pytest.CaptureFixture[str]
) -> None:
    told = help_of(name, capsys)

    first = " ".join((GROUP.commands[name].help or "").split("\n")[0].split())
    assert first.endswith(".")
    assert first in told
    for parameter in (parameter for command, parameter in PARAMETERS if command == name):
        assert parameter.opts[0] in told or parameter.opts[0].upper() in told or str(parameter.metavar) in told


@pytest.mark.parametrize(("name", "parameter"), PARAMETERS, ids=[f"{n} {p.name}" for n, p in PARAMETERS])
def test_every_argument_and_option_says_in_a_sentence_what_it_is(name: str, parameter: Any) -> None:
    text = parameter.help

    assert text, f"{name}: {parameter.name}"
    assert text[0].isupper()
    assert text.endswith((".", ")", ").")), text


@pytest.mark.parametrize("name", ["rehearse", "run", "fit", "check", "verify"])
def test_every_command_that_answers_can_answer_as_json(name: str, capsys: pytest.CaptureFixture[str]) -> None:
    assert "--json" in help_of(name, capsys)
