"""Options that several commands share, so that they read alike everywhere."""

from pathlib import Path
from typing import Annotated

import typer

RecipePath = Annotated[
    Path, typer.Argument(metavar="RECIPE", help="What to measure: a YAML file, or the name of a ready recipe.")
]
RunPath = Annotated[Path, typer.Argument(metavar="FILE", help="A run file (HDF5).")]
Out = Annotated[
    Path | None,
    typer.Option(help="The run file to write, or a folder for it; never overwritten.", show_default=False),
]
Trace = Annotated[
    Path | None,
    typer.Option(help="Write every byte to and from the instruments to this file.", show_default=False),
]
AsJson = Annotated[bool, typer.Option("--json", help="Answer with one JSON object.")]
