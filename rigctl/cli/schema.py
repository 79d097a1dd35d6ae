"""`polrig schema`: the JSON Schema of a recipe or rig file, for an editor that completes and checks."""

from typing import Annotated, Literal

import typer

NAME = "schema"


def command(
    what: Annotated[Literal["recipe", "rig"], typer.Argument(metavar="recipe|rig", help="Which file.")],
) -> int:
    """Print the JSON Schema of a recipe or rig file."""
    from rigctl.cli.console import say_json
    from rigctl.files.schema import recipe_schema, rig_schema
    from rigctl.plugins import find_bench_factory, find_drivers

    say_json(recipe_schema() if what == "recipe" else rig_schema(find_drivers(), find_bench_factory()))
    return 0
