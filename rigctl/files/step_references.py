"""What the steps of a recipe mean for its roles and its optics.

It owns the checks of sweeps, preparations and what is left out of the beam; it passes over what is missing.
"""

from collections.abc import Collection
from dataclasses import dataclass, field

from rigctl.files.leaves import LABEL, is_label
from rigctl.files.mistakes import either, nearest_word, quoted
from rigctl.files.optics_references import elements_of, name_of
from rigctl.files.part import Part
from rigctl.files.recipe import AXIS_KINDS
from rigctl.files.roles import Roles
from rigctl.files.written_sweep import REPEAT

RESERVED_STEPS = ("acquisition", "darks", "default", "environment", "instrument", "sample", "user")
"""Names that the run file uses beside those of its steps."""


@dataclass(slots=True)
class Settings:
    """Every part that sets a role: a sweep's axis or a preparation, by role."""

    parts: dict[str, list[Part]] = field(default_factory=dict)

    def add(self, role: str | None, part: Part) -> None:
        """Note that a part sets a role, where the role is declared."""
        if role is not None:
            self.parts.setdefault(role, []).append(part)


def check_steps(recipe: Part, roles: Roles) -> Settings:
    """Gather every mistake of sweeps and preparations; return what sets which role."""
    settings = Settings()
    sweep, steps = recipe.at("sweep"), recipe.at("steps")
    if sweep.is_there and steps.is_there:
        steps.wrong_key("'sweep' and 'steps' exclude each other", expected="one of them")
    elif not sweep.is_there and not steps.is_there and not recipe.has_slip_for("sweep", "steps"):
        recipe.missing("nothing is swept", expected="a key 'sweep', or 'steps'")
    _check_preparations(recipe.at("prepare"), roles, settings)
    elements = elements_of(recipe.at("optics"))
    seen: dict[str, str] = {}
    for owner in (recipe, *steps.entries()):
        out = _check_without(owner.at("without"), elements)
        if owner is not recipe:
            _check_step_name(owner.at("name"), seen)
            _check_unattended(owner)
        if owner.at("sweep").entries():
            in_beam = [(kind, part) for kind, part in elements if name_of(kind, part).text not in out]
            _check_sweep(owner.at("sweep"), roles, in_beam, settings)
    return settings


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


def _check_unattended(step: Part) -> None:
    """Refuse to say what happens without a person where none is needed."""
    unattended = step.at("unattended")
    if unattended.is_there and not step.at("without").is_there and not step.has_slip_for("without"):
        unattended.wrong_key("nobody is needed in this step", expected="'unattended' beside 'without'")


def _check_without(without: Part, elements: Collection[tuple[str, Part]]) -> set[str]:
    """Check the names of what is out of the beam, and return them."""
    kinds = {name_of(kind, part).text or "": kind for kind, part in elements}
    movable = [name for name, kind in kinds.items() if kind in ("polarizer", "retarder")]
    out: set[str] = set()
    for word in without.words():
        name = word.text
        if name is None:
            continue
        if name not in kinds:
            expected = either(map(quoted, movable)) if movable else "an element of the optics"
            word.wrong(f"no element is called {quoted(name)}", expected=expected, nearest=nearest_word(name, movable))
        elif name not in movable:
            word.wrong(f"the {kinds[name]} {quoted(name)} stays in the beam", expected="a polarizer or retarder")
        elif name in out:
            word.wrong(f"{quoted(name)} is listed twice")
        out.add(name)
    return out


def _check_preparations(prepare: Part, roles: Roles, settings: Settings) -> None:
    """Check that each entry prepares one role, and none is prepared twice."""
    for entry in prepare.entries():
        _check_single(entry, "one role in an entry: they are prepared in this order")
        for name, part in entry.items().items():
            if name in settings.parts:
                part.wrong_key(f"the role {quoted(name)} is prepared already", expected="each role once")
            role = roles.use(part, "temperature controller", "current source", name=name)
            settings.add(role, part)


def _check_sweep(sweep: Part, roles: Roles, elements: Collection[tuple[str, Part]], settings: Settings) -> None:
    """Check what a sweep sets, and that it leaves out no mount that an element in the beam needs."""
    swept: set[str | None] = set()
    for entry in sweep.entries():
        _check_single(entry, "one role in an entry: the first turns slowest")
        for name, axis in entry.items().items():
            if name in swept:
                axis.wrong_key(f"{quoted(name)} is swept twice in one step", expected="each role once")
            role = name if name == REPEAT else roles.use(axis, *AXIS_KINDS, name=name)
            swept.add(role)
            settings.add(role, axis)
    for element in (part for _, part in elements):
        mount = element.at("turned by").text
        if mount is not None and not swept & {mount, None} and roles.kind(mount) == "rotation stage":
            swept.add(mount)
            what = f"the sweep leaves out {quoted(mount)}, so what it turns has no angle"
            sweep.missing(what, expected=f"an entry such as {mount}: {{turn: 1, step: 5 deg}}")


def _check_single(entry: Part, expected: str) -> None:
    if isinstance(entry.value, dict) and len(entry.value) != 1:
        entry.wrong(f"{len(entry.value) or 'no'} roles stand in one entry", expected=expected)


def check_purposes(settings: Settings, roles: Roles, recipe: Part) -> None:
    """Refuse what is set to no purpose, and what is needed but never set: most likely a key is missing."""
    elements, source = elements_of(recipe.at("optics")), recipe.at("source")
    needed = _needed(elements, source, roles)
    serving = {part.text for part in needed}
    mounts = {part.at("turned by").text for _, part in elements}
    for name, parts in settings.parts.items():
        kind = roles.kind(name)
        for part in parts:
            if kind == "rotation stage" and name not in mounts:
                part.wrong_key(f"the mount {quoted(name)} turns no element", expected="an element turned by it")
            elif kind == "current source" and name not in serving:
                expected = f"source: {{driven by: {name}}}"
                part.wrong_key(f"the source {quoted(name)} drives nothing", expected=expected)
            elif kind == "temperature controller" and "sweep" in part.keys and name not in serving:
                what = f"the controller {quoted(name)} neither cools the source nor warms an element"
                part.wrong_key(what, expected="an element warmed by it, or a source cooled by it")
    for part in needed:
        if part.text not in settings.parts:
            what = f"nothing sets {quoted(part.text)}"
            part.wrong(what, expected="an entry for it under 'prepare', or in a sweep")


def _needed(elements: Collection[tuple[str, Part]], source: Part, roles: Roles) -> list[Part]:
    """Return every part that names a role which must be set for it to have a meaning."""
    parts = [source.at("driven by"), source.at("cooled by")]
    for _, element in elements:
        parts += [element.at("warmed by"), *element.at("each").items().values()]
    return [part for part in parts if part.text is not None and roles.kind(part.text) is not None]
