"""What one part of a recipe means for another: roles, source, optics, steps and darks.

It owns the checks that need more than one place of the file. They look at what is written and pass over what
is missing, so that a file's other mistakes do not hide these.
"""

from rigctl.files.document import Document
from rigctl.files.mistakes import Mistakes
from rigctl.files.optics_references import check_optics
from rigctl.files.part import Part
from rigctl.files.recipe import BY_HAND
from rigctl.files.roles import Roles
from rigctl.files.step_references import check_purposes, check_steps

NEEDED_KINDS = ("rotation stage", "power meter", "current source", "temperature controller", "slide")
"""Kinds of roles that are there to be named: a shutter or a relay serves by itself."""


def check_references(document: Document, mistakes: Mistakes) -> None:
    """Gather every mistake between the parts of a recipe."""
    recipe = Part.whole(document, mistakes)
    roles = Roles(recipe.at("roles"))
    roles.check()
    _check_source(recipe.at("source"), roles)
    check_optics(recipe.at("optics"), roles)
    settings = check_steps(recipe, roles)
    _check_darks(recipe, roles)
    if mistakes.is_empty:
        # what is idle is most often the echo of a name that is mistaken elsewhere
        check_purposes(settings, roles, recipe)
        roles.check_used(NEEDED_KINDS)


def _check_source(source: Part, roles: Roles) -> None:
    """Check what drives the source and what keeps its temperature."""
    if source.at("driven by").is_there:
        roles.use(source.at("driven by"), "current source")
    if source.at("cooled by").is_there:
        roles.use(source.at("cooled by"), "temperature controller")


def _check_darks(recipe: Part, roles: Roles) -> None:
    """Check what keeps the light away, and that it does at least once."""
    by = recipe.at("dark").at("by")
    if by.text is not None and by.text != BY_HAND:
        roles.use(by, "shutter", may_be_optional=True)
    background, source = recipe.at("background"), recipe.at("source")
    if background.is_there and not source.at("driven by").is_there and not source.has_slip_for("driven by"):
        background.wrong_key("a background switches the source off, but no role drives it", expected="'driven by'")
    for kind in ("dark", "background", "zero"):
        unlit = recipe.at(kind)
        times = [unlit.at(when) for when in ("before", "after")]
        if all(when.text in ("false", "no") for when in times) and not unlit.at("every").is_there:
            what = f"a {kind} neither before nor after is none"
            times[0].wrong_key(what, expected=f"one of them true, or no {kind!r} at all")
