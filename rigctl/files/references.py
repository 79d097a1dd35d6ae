"""What one part of a recipe means for another: roles, mounts, detectors, steps and darks.

It owns the checks that need more than one place of the file. They look at what is written and pass over what
is missing, so that a file's other mistakes do not hide these.
"""

from collections.abc import Collection

from rigctl.files.document import Document
from rigctl.files.leaves import LABEL, is_label
from rigctl.files.mistakes import Mistakes, quoted
from rigctl.files.optics_references import check_optics, mounts_of
from rigctl.files.part import Part
from rigctl.files.recipe import BY_HAND
from rigctl.files.roles import Roles

RESERVED_STEPS = ("acquisition", "darks", "default", "environment", "instrument", "sample", "user")
"""Names that the run file uses beside those of its steps."""


def check_references(document: Document, mistakes: Mistakes) -> None:
    """Gather every mistake between the parts of a recipe."""
    recipe = Part.whole(document, mistakes)
    roles = Roles(recipe.at("roles"))
    roles.check()
    check_optics(recipe.at("optics"), roles)
    mounts = mounts_of(recipe.at("optics"))
    _check_steps(recipe)
    sweeps = [owner.at("sweep") for owner in (recipe, *recipe.at("steps").entries())]
    for sweep in sweeps:
        if sweep.entries():
            _check_sweep(sweep, roles, mounts)
    _check_dark(recipe.at("dark"), roles)
    if mistakes.is_empty:
        # what is idle is most often the echo of a name that is mistaken elsewhere
        for sweep in sweeps:
            _check_idle(sweep, mounts)
        roles.check_used(("rotation stage", "power meter"))


def _check_steps(recipe: Part) -> None:
    """Check that there is one sweep or named steps, and the names."""
    sweep, steps = recipe.at("sweep"), recipe.at("steps")
    if sweep.is_there and steps.is_there:
        steps.wrong_key("'sweep' and 'steps' exclude each other", expected="one of them")
    elif not sweep.is_there and not steps.is_there and not recipe.has_slip_for("sweep", "steps"):
        recipe.missing("nothing is swept", expected="a key 'sweep', or 'steps'")
    seen: dict[str, str] = {}
    for step in steps.entries():
        _check_step_name(step.at("name"), seen)


def _check_step_name(part: Part, seen: dict[str, str]) -> None:
    """Refuse a name that the run file cannot use, or that it uses already."""
    name = part.text
    if name is None:
        return
    folded = name.replace(" ", "_")
    if not is_label(name):
        part.wrong(f"{quoted(name)} is no name of a step", expected=LABEL)
    elif folded in RESERVED_STEPS:
        part.wrong(f"the run file uses the name {quoted(name)} itself", expected="another name")
    elif folded in seen:
        part.wrong(f"another step is called {quoted(seen[folded])}", expected="a name for this step alone")
    seen[folded] = name


def _check_sweep(sweep: Part, roles: Roles, mounts: Collection[str]) -> None:
    """Check which mounts a sweep turns, and that it leaves out none that an element needs."""
    swept: set[str | None] = set()
    for entry in sweep.entries():
        axes = entry.items()
        if len(axes) != 1 and isinstance(entry.value, dict):
            what = f"{len(axes) or 'no'} mounts stand in one entry"
            entry.wrong(what, expected="one mount in an entry: the first turns slowest")
        for name, axis in axes.items():
            if name in swept:
                axis.wrong_key(f"the mount {quoted(name)} is swept twice in one step", expected="each mount once")
            swept.add(roles.use(axis, "rotation stage", name=name))
    for name in mounts:
        if not swept & {name, None} and roles.kind(name) == "rotation stage":
            what = f"the sweep leaves out {quoted(name)}, so what it turns has no angle"
            sweep.missing(what, expected=f"an entry such as {name}: {{turn: 1, step: 5 deg}}")


def _check_idle(sweep: Part, mounts: Collection[str]) -> None:
    """Refuse to sweep a mount that turns nothing: most likely an element lacks its mount."""
    for entry in sweep.entries():
        for name, axis in entry.items().items():
            if name not in mounts:
                axis.wrong_key(f"the mount {quoted(name)} turns no element", expected="an element turned by it")


def _check_dark(dark: Part, roles: Roles) -> None:
    """Check what blocks the beam, and that it does at least once."""
    by = dark.at("by")
    if by.text is not None and by.text != BY_HAND:
        roles.use(by, "shutter", may_be_optional=True)
    times = [dark.at(when) for when in ("before", "after")]
    if all(when.text in ("false", "no") for when in times):
        times[0].wrong_key("a dark neither before nor after is none", expected="one of them true, or no 'dark' at all")
