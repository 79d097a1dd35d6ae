"""`polrig check`: what is wrong with a recipe, or what the night will be like."""

from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

import typer

from rigctl.cli.options import AsJson, RecipePath

if TYPE_CHECKING:
    from rigctl.cli.loading import Loaded

NAME = "check"
BYTES_A_VISIT = 1500
"""Measured on run files of one mount and one meter with four readings a visit; a large share is fixed."""
BYTES_A_FILE = 120_000


def command(
    recipe: RecipePath,
    rig: Annotated[
        list[Path] | None, typer.Option(help="Rig file; may be given several times.", show_default=False)
    ] = None,
    as_json: AsJson = False,
) -> int:
    """Tell what is wrong, or what to expect.

    Checks a recipe, alone or against rigs, and predicts its duration and uncertainties. Sends nothing.
    """
    from rigctl.cli.console import say, say_json
    from rigctl.cli.loading import load

    rigs: list[Path | None] = [*rig] if rig else [None]
    answers = [_answer(load(recipe, path)) for path in rigs]
    if as_json:
        say_json({"recipe": str(recipe), "rigs": [_plain(answer) for answer in answers]})
        return 0
    for answer in answers:
        for line in _lines(answer):
            say(line)
    return 0


def _answer(loaded: "Loaded") -> dict[str, Any]:
    from rigctl.runner.bench import declared_capabilities
    from rigctl.runner.forecast import Forecast
    from rigctl.runner.limits import refuse_beyond_limits
    from rigctl.runner.plan import count_visits
    from rigctl.runner.prospect import predicted

    refuse_beyond_limits(loaded.recipe, loaded.rig, loaded.drivers)
    capabilities = declared_capabilities(loaded.recipe, loaded.rig, loaded.drivers)
    visits = count_visits(loaded.recipe)
    prediction = predicted(loaded.recipe, capabilities)
    return {
        "title": loaded.recipe.title,
        "rig": loaded.rig.title,
        "visits": visits,
        "duration_s": Forecast(loaded.recipe, capabilities).duration_s(),
        "file_bytes": BYTES_A_FILE + BYTES_A_VISIT * visits,
        "predicted": prediction,
    }


def _plain(answer: dict[str, Any]) -> dict[str, Any]:
    from dataclasses import asdict

    return answer | {"predicted": asdict(answer["predicted"])}


def _lines(answer: dict[str, Any]) -> list[str]:
    from rigctl.cli.console import duration
    from rigctl.cli.show import prediction_lines

    size_mb = answer["file_bytes"] / 1e6
    return [
        f"'{answer['title']}' on '{answer['rig']}': nothing wrong",
        f"  {answer['visits']} visits, about {duration(answer['duration_s'])}, a file of about {size_mb:.1f} MB",
        *prediction_lines(answer["predicted"]),
    ]
