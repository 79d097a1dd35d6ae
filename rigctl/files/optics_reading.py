"""From the optics of a recipe as they are written to the elements that are meant.

It owns what stands for what is not written: an axis and a dial at zero, temperatures that count from 25 degC.
"""

from rigctl.files.recipe import OpticalElement
from rigctl.files.written_optics import (
    WrittenDetector,
    WrittenElement,
    WrittenPickOff,
    WrittenPolarizer,
    WrittenRetarder,
)
from rigctl.quantities import Measured

REFERENCE_C = 25.0
"""Temperature at which a retardance is stated where the recipe does not say it; common in data sheets."""
ZERO = Measured(0.0)


def element_of(written: WrittenElement) -> OpticalElement:
    """Return the element that an entry of the optics means."""
    _, part = written.one
    unknown, each = tuple(part.unknown), dict(part.each)
    if isinstance(part, WrittenDetector):
        stray = part.stray_light
        return OpticalElement("detector", part.role, role=part.role, stray_light=stray, unknown=unknown, each=each)
    if isinstance(part, WrittenPickOff):
        fraction = part.fraction
        return OpticalElement("pick-off", part.name, to=part.to, fraction=fraction, unknown=unknown, each=each)
    return _plate(part, unknown, each)


def _plate(part: WrittenPolarizer | WrittenRetarder, unknown: tuple[str, ...], each: dict[str, str]) -> OpticalElement:
    taker, flip = next(iter((part.taken_out_by or {}).items()), (None, None))
    retarder = part if isinstance(part, WrittenRetarder) else None
    warmed_by = None if retarder is None else retarder.warmed_by
    coefficient = reference_c = None
    if retarder is not None and warmed_by is not None:
        coefficient = retarder.temperature_coefficient or ZERO
        reference_c = REFERENCE_C if retarder.reference_temperature is None else retarder.reference_temperature
    return OpticalElement(
        "polarizer" if retarder is None else "retarder",
        part.name,
        part.turned_by,
        axis=part.axis or ZERO,
        dial_offset=part.dial_offset or (ZERO if part.turned_by else None),
        extinction_ratio=part.extinction_ratio if isinstance(part, WrittenPolarizer) else None,
        retardance=None if retarder is None else retarder.retardance,
        unknown=unknown,
        warmed_by=warmed_by,
        temperature_coefficient=coefficient,
        reference_temperature_c=reference_c,
        taken_out_by=taker,
        in_deg=None if flip is None else flip.in_,
        out_deg=None if flip is None else flip.out,
        each=each,
    )
