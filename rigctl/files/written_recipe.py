"""A recipe as it is written: every key that may stand in one, and the type of what stands there.

It owns the shape of the file and the JSON Schema that follows from it; what one part means for another is
checked in `rigctl.files.references`.
"""

import re
from typing import Annotated, get_args

from pydantic import AfterValidator, BeforeValidator, Field, ValidationInfo

from rigctl.files.leaves import (
    SwitchText,
    TitleText,
    WordText,
    choice,
    from_text,
    measured,
    quantity,
    read_choice,
    shown,
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


Time = Annotated[float, quantity("time", is_positive=True), shown("400 ms")]
Readings = Annotated[float, quantity("count"), AfterValidator(_readings), shown("4 readings")]
MeasuredLength = Annotated[Measured, measured("length"), shown("785.2 nm +- 0.3 nm")]
MeasuredPower = Annotated[Measured, measured("power", is_positive=True), shown("2 mW +- 30 %")]
MeasuredDrift = Annotated[Measured, measured("drift"), shown("0 %/h +- 0.5 %/h")]
KindText = Annotated[RoleKind, choice(*get_args(RoleKind)), shown("rotation stage")]
OrderText = Annotated[Order, from_text(_read_order, "an order such as interleaved 3"), shown("interleaved 3")]
UnattendedText = Annotated[str, choice(GO_ON, "stop"), shown(GO_ON)]


def _role(value: object) -> object:
    """A role may be written as its kind alone."""
    return {"is": value} if isinstance(value, str) else value


class WrittenRole(Written):
    """What a role asks for."""

    kind: KindText = Field(alias="is")
    optional: SwitchText = False


RoleForms = KindText | WrittenRole


class WrittenSource(Written):
    """The light."""

    wavelength: MeasuredLength
    power: MeasuredPower | None = None
    drift: MeasuredDrift | None = None
    driven_by: WordText | None = None
    cooled_by: WordText | None = None


class WrittenStep(Written):
    """One sweep with a name."""

    name: WordText
    sweep: Sweep
    order: OrderText = Order()
    without: Words = Field(default_factory=list)
    unattended: UnattendedText = "stop"


class WrittenDwell(Written):
    """How long to average."""

    time: Time
    at_least: Readings


class WrittenUnlit(Written):
    """When no light is let to the detectors: the source off, or the detectors capped."""

    before: SwitchText = True
    after: SwitchText = True
    every: Time | None = None


class WrittenDark(WrittenUnlit):
    """When the beam is blocked, and by what."""

    by: WordText


class WrittenRecipe(Written):
    """A whole recipe."""

    recipe: TitleText
    roles: dict[str, Annotated[WrittenRole, BeforeValidator(_role, json_schema_input_type=RoleForms)]]
    source: WrittenSource
    optics: Annotated[list[WrittenElement], Field(min_length=1)]
    prepare: Preparations | None = None
    sweep: Sweep | None = None
    steps: Annotated[list[WrittenStep], Field(min_length=1)] | None = None
    dwell: WrittenDwell
    dark: WrittenDark | None = None
    background: WrittenUnlit | None = None
    zero: WrittenUnlit | None = None
    tolerance: dict[str, WordText] = Field(default_factory=dict)
    target_uncertainty: dict[str, WordText] = Field(default_factory=dict)
