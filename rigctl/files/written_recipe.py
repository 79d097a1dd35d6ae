"""A recipe as it is written: every key that may stand in one, and the type of what stands there.

It owns the shape of the file and the JSON Schema that follows from it; what one part means for another is
checked in `rigctl.files.references`.
"""

import re
from typing import Annotated, get_args

from pydantic import AfterValidator, BeforeValidator, Field, ValidationInfo

from rigctl.files.leaves import (
    Leaf,
    Shown,
    SwitchText,
    TitleText,
    WordText,
    choice,
    measured,
    quantity,
    read_choice,
    wrong,
)
from rigctl.files.mistakes import quoted
from rigctl.files.recipe import Order, OrderKind
from rigctl.files.written import Words, Written
from rigctl.files.written_optics import WrittenElement
from rigctl.files.written_sweep import Preparations, Sweep
from rigctl.interfaces import RoleKind
from rigctl.quantities import Measured

FEWEST_READINGS = 2
"""One reading has no spread, and without a spread there is no uncertainty."""
NARROWEST = 2
"""A stride of one is the order as it is written."""
ORDER = {"type": "string", "pattern": "^(as written|interleaved +[0-9]{1,9}|shuffled +[0-9]{1,9})$"}
GO_ON = "go on"


def _readings(count: float) -> float:
    """Refuse so few readings that their spread is not known."""
    if count < FEWEST_READINGS:
        raise wrong("one reading has no spread", expected=f"at least {FEWEST_READINGS} readings")
    return count


def _read_order(text: str, _: ValidationInfo) -> Order:
    """Read `as written`, `interleaved 3` (the stride) or `shuffled 7` (the seed)."""
    match = re.fullmatch(r"(interleaved|shuffled) +([0-9]{1,9})", text)
    if match is None:
        read_choice(text, ("as written", "interleaved 3", "shuffled 7"))
        return Order()
    kind: OrderKind = "interleaved" if match[1] == "interleaved" else "shuffled"
    number = int(match[2])
    if kind == "interleaved" and number < NARROWEST:
        raise wrong(f"{quoted(text)} leaves nothing between", expected=f"interleaved {NARROWEST} or more")
    return Order(kind, number)


Time = Annotated[float, quantity("time", is_positive=True), Shown("400 ms")]
Readings = Annotated[float, quantity("count"), AfterValidator(_readings), Shown("4 readings")]
MeasuredLength = Annotated[Measured, measured("length"), Shown("785.2 nm +- 0.3 nm")]
MeasuredPower = Annotated[Measured, measured("power", is_positive=True), Shown("2 mW +- 30 %")]
MeasuredDrift = Annotated[Measured, measured("drift"), Shown("0 %/h +- 0.5 %/h")]
KindText = Annotated[RoleKind, choice(*get_args(RoleKind)), Shown("rotation stage")]
OrderText = Annotated[Order, Leaf(_read_order, "an order such as interleaved 3", ORDER), Shown("interleaved 3")]
UnattendedText = Annotated[str, choice(GO_ON, "stop"), Shown(GO_ON)]


def _role(value: object) -> object:
    """A role may be written as its kind alone."""
    return {"is": value} if isinstance(value, str) else value


class WrittenRole(Written):
    """What a role asks for."""

    kind: KindText = Field(description="kind of instrument", alias="is")
    optional: SwitchText = Field(False, description="whether a rig may leave it out")


RoleForms = KindText | WrittenRole


class WrittenSource(Written):
    """The light."""

    wavelength: MeasuredLength = Field(description="wavelength of the light")
    power: MeasuredPower | None = Field(None, description="power on the first element")
    drift: MeasuredDrift | None = Field(None, description="relative change of the power with time")
    driven_by: WordText | None = Field(None, description="role of the current source that drives it")
    cooled_by: WordText | None = Field(None, description="role of the temperature controller that keeps it")


class WrittenStep(Written):
    """One sweep with a name."""

    name: WordText = Field(description="name of the step in the run file")
    sweep: Sweep = Field(description="what is set to which values; the first turns slowest")
    order: OrderText = Field(
        Order(), description="as written, interleaved (every n-th value, then those between) or shuffled (by a seed)"
    )
    without: Words = Field(default_factory=list, description="elements that are out of the beam")
    unattended: UnattendedText = Field("stop", description="what to do when nobody is there to take an element out")


class WrittenDwell(Written):
    """How long to average."""

    time: Time = Field(description="how long to average at each visit")
    at_least: Readings = Field(description="in how many readings")


class WrittenUnlit(Written):
    """When no light is let to the detectors: the source off, or the detectors capped."""

    before: SwitchText = Field(True, description="whether to take it before each step")
    after: SwitchText = Field(True, description="whether to take it after each step")
    every: Time | None = Field(None, description="how long until it is taken again within a step")


class WrittenDark(WrittenUnlit):
    """When the beam is blocked, and by what."""

    by: WordText = Field(description="role of the shutter, or hand")


class WrittenRecipe(Written):
    """A whole recipe."""

    recipe: TitleText = Field(description="title")
    roles: dict[str, Annotated[WrittenRole, BeforeValidator(_role, json_schema_input_type=RoleForms)]] = Field(
        description="what must stand on the bench, by the names that the recipe uses"
    )
    source: WrittenSource = Field(description="the light")
    optics: list[WrittenElement] = Field(min_length=1, description="the light's way, in order")
    prepare: Preparations | None = Field(None, description="what is set before the steps, in this order")
    sweep: Sweep | None = Field(None, description="what is set to which values; the first turns slowest")
    steps: Annotated[list[WrittenStep], Field(min_length=1)] | None = Field(None, description="sweeps with names")
    dwell: WrittenDwell = Field(description="how long to average")
    dark: WrittenDark | None = Field(None, description="dwells with the beam blocked at the source")
    background: WrittenUnlit | None = Field(None, description="dwells with the source switched off")
    zero: WrittenUnlit | None = Field(None, description="dwells with the detectors capped by hand")
    tolerance: dict[str, WordText] = Field(
        default_factory=dict, description="what decides, by address: part.retardance: 0.49 to 0.51 waves"
    )
    target_uncertainty: dict[str, WordText] = Field(
        default_factory=dict, description="how well a quantity is to be known, by address"
    )
