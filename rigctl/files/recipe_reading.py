"""From the file of a recipe to a checked `Recipe`.

It owns the order of the checks and the way from what is written to what is meant.
"""

from pathlib import Path

from rigctl.errors import QuantityError
from rigctl.files.document import Document, parse_document, read_document
from rigctl.files.leaves import WAVELENGTH
from rigctl.files.mistakes import Mistakes
from rigctl.files.recipe import Axis, Dark, DwellPlan, OpticalElement, Recipe, Role, Source, Step
from rigctl.files.references import check_references
from rigctl.files.shape import shaped
from rigctl.files.written_recipe import (
    Sweep,
    WrittenDetector,
    WrittenElement,
    WrittenPolarizer,
    WrittenRecipe,
    WrittenRetarder,
)
from rigctl.quantities import Measured, parse_measured

UNNAMED_STEP = "data"
"""The step of a recipe that has a sweep and no steps."""
_ZERO = Measured(0.0)


def load_recipe(path: Path) -> Recipe:
    """Read a recipe; raises `FileError` with every mistake of it."""
    mistakes = Mistakes(str(path))
    return _recipe(read_document(path, mistakes), mistakes)


def parse_recipe(text: str, path_name: str) -> Recipe:
    """Read a recipe from a text that is not in a file of its own, such as one kept in a run file."""
    mistakes = Mistakes(path_name)
    return _recipe(parse_document(text, mistakes), mistakes)


def _recipe(document: Document, mistakes: Mistakes) -> Recipe:
    """Check a document and make a recipe of it."""
    written = shaped(WrittenRecipe, document, mistakes, context={WAVELENGTH: _wavelength_m(document)})
    check_references(document, mistakes)
    mistakes.raise_if_any()
    if written is None:
        mistakes.refuse("is no recipe")
    return Recipe(
        title=written.recipe,
        roles={name: Role(role.kind, role.optional) for name, role in written.roles.items()},
        source=Source(written.source.wavelength, written.source.power, written.source.drift),
        optics=tuple(map(_element, written.optics)),
        steps=_steps(written),
        dwell=DwellPlan(written.dwell.time, round(written.dwell.at_least)),
        dark=None if written.dark is None else Dark(written.dark.by, written.dark.before, written.dark.after),
        text=document.text,
        path=document.path,
        sha256=document.sha256,
        places=document.places,
    )


def _wavelength_m(document: Document) -> float | None:
    """Wavelength as far as it can be read, so that a retardance in nm makes sense."""
    source = document.data.get("source")
    text = source.get("wavelength") if isinstance(source, dict) else None
    try:
        value = parse_measured(text, "length").value if isinstance(text, str) else 0.0
    except QuantityError:
        return None
    return value if value > 0 else None


def _steps(written: WrittenRecipe) -> tuple[Step, ...]:
    if written.sweep is not None:
        return (Step(UNNAMED_STEP, _axes(written.sweep)),)
    return tuple(Step(step.name, _axes(step.sweep)) for step in written.steps or ())


def _axes(sweep: Sweep) -> tuple[Axis, ...]:
    return tuple(Axis(role, axis.angles_deg, axis.approach, axis.settle) for one in sweep for role, axis in one.items())


def _element(written: WrittenElement) -> OpticalElement:
    kind, part = written.one
    unknown = tuple(part.unknown)
    if isinstance(part, WrittenDetector):
        return OpticalElement(kind, part.role, role=part.role, stray_light=part.stray_light, unknown=unknown)
    return OpticalElement(
        kind,
        part.name,
        part.turned_by,
        axis=part.axis or _ZERO,
        dial_offset=part.dial_offset or (_ZERO if part.turned_by else None),
        extinction_ratio=part.extinction_ratio if isinstance(part, WrittenPolarizer) else None,
        retardance=part.retardance if isinstance(part, WrittenRetarder) else None,
        unknown=unknown,
    )
