"""What a run file says of itself before the first instrument is touched."""

import sys
from datetime import datetime
from importlib.metadata import version

from rigctl import __version__
from rigctl.files.recipe import Recipe
from rigctl.files.rig import Rig
from rigctl.record.layout import Document, Header
from rigctl.runner.plan import step_layouts


def monitor_role(recipe: Recipe, rig: Rig) -> str:
    """Return the power meter at a pick-off, where the rig fills it; else nothing."""
    monitors = (part.to for part in recipe.optics if part.kind == "pick-off" and part.to is not None)
    return next((role for role in monitors if rig.entry(role) is not None), "")


def make_header(
    recipe: Recipe, rig: Rig, *, start: datetime, identifier: str, operator: str = "", part: str = ""
) -> Header:
    """Return the header of a run of a recipe on a rig; a rehearsal adds its seed and hidden truth."""
    python = ".".join(map(str, sys.version_info[:3]))
    libraries = {name: version(name) for name in ("numpy", "h5py")}
    return Header(
        uuid=identifier,
        start=start,
        title=recipe.title,
        recipe=Document(recipe.text, recipe.path, recipe.sha256),
        rig=Document(rig.text, rig.path, rig.sha256),
        steps=step_layouts(recipe),
        detectors=tuple(role for role, kind in recipe.roles.items() if kind.kind == "power meter" and rig.entry(role)),
        versions={"polrig": __version__, "python": python, **libraries},
        monitor=monitor_role(recipe, rig),
        operator=operator,
        part=part,
    )
