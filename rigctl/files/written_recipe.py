"""A recipe as it is written: every key that may stand in one, and the type of what stands there.

It owns the shape of the file and the JSON Schema that follows from it; what one part means for another is
checked in `rigctl.files.references`.
"""

from typing import Annotated, get_args

from pydantic import AfterValidator, BeforeValidator, Field, model_validator

from rigctl.files.angles import angles_of
from rigctl.files.leaves import (
    NameText,
    SwitchText,
    TitleText,
    WordText,
    choice,
    exactly_one,
    measured,
    quantity,
    shown,
    span,
    wrong,
)
from rigctl.files.recipe import Approach, ElementKind
from rigctl.files.written import Written
from rigctl.interfaces import RoleKind
from rigctl.quantities import Measured

FEWEST_READINGS = 2
"""One reading has no spread, and without a spread there is no uncertainty."""


def _readings(count: float) -> float:
    """Refuse so few readings that their spread is not known."""
    if count < FEWEST_READINGS:
        raise wrong("one reading has no spread", expected=f"at least {FEWEST_READINGS} readings")
    return count


Angle = Annotated[float, quantity("angle"), shown("5 deg")]
Duration = Annotated[float, quantity("time"), shown("150 ms")]
Time = Annotated[float, quantity("time", is_positive=True), shown("400 ms")]
Readings = Annotated[float, quantity("count"), AfterValidator(_readings), shown("4 readings")]
Number = Annotated[float, quantity("number", is_positive=True), shown("1")]
AngleSpan = Annotated[tuple[float, float], span("angle"), shown("0 deg to 90 deg")]
MeasuredAngle = Annotated[Measured, measured("angle"), shown("0 deg +- 5 deg")]
MeasuredRatio = Annotated[Measured, measured("ratio"), shown("1000:1 +- 30 %")]
MeasuredRetardance = Annotated[Measured, measured("retardance"), shown("0.25 waves")]
MeasuredLength = Annotated[Measured, measured("length"), shown("785.2 nm +- 0.3 nm")]
MeasuredPower = Annotated[Measured, measured("power", is_positive=True), shown("2 mW +- 30 %")]
MeasuredStray = Annotated[Measured, measured("power"), shown("20 nW")]
MeasuredDrift = Annotated[Measured, measured("drift"), shown("0 %/h +- 0.5 %/h")]
KindText = Annotated[RoleKind, choice(*get_args(RoleKind)), shown("rotation stage")]
ApproachText = Annotated[Approach, choice(*get_args(Approach)), shown("from below")]


def _role(value: object) -> object:
    """A role may be written as its kind alone."""
    return {"is": value} if isinstance(value, str) else value


def _words(value: object) -> object:
    """A list of one word may be written as the word."""
    return [value] if isinstance(value, str) else value


Words = Annotated[list[WordText], BeforeValidator(_words, json_schema_input_type=WordText | list[WordText])]


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


class WrittenPlate(Written):
    """An element in the beam, fixed or turned."""

    name: NameText
    turned_by: WordText | None = None
    axis: MeasuredAngle | None = None
    dial_offset: MeasuredAngle | None = None
    unknown: Words = Field(default_factory=list)


class WrittenPolarizer(WrittenPlate):
    """A polarizer."""

    extinction_ratio: MeasuredRatio


class WrittenRetarder(WrittenPlate):
    """A retarder."""

    retardance: MeasuredRetardance


class WrittenDetector(Written):
    """A detector, at the end of the light's way."""

    role: WordText
    stray_light: MeasuredStray | None = None
    unknown: Words = Field(default_factory=list)


class WrittenElement(Written):
    """One entry of the optics: its kind is its only key."""

    polarizer: WrittenPolarizer | None = None
    retarder: WrittenRetarder | None = None
    detector: WrittenDetector | None = None

    @model_validator(mode="after")
    def _has_one_kind(self) -> "WrittenElement":
        exactly_one(list(type(self).model_fields), sorted(self.model_fields_set))
        return self

    @property
    def one(self) -> tuple[ElementKind, WrittenPolarizer | WrittenRetarder | WrittenDetector]:
        """Its kind and what is said of it."""
        if self.polarizer is not None:
            return "polarizer", self.polarizer
        if self.retarder is not None:
            return "retarder", self.retarder
        if self.detector is not None:
            return "detector", self.detector
        raise wrong("an element without a kind")


class WrittenAxis(Written):
    """The angles of one mount in a sweep."""

    turn: Number | None = None
    values: Annotated[list[Angle], Field(min_length=1)] | None = None
    range: AngleSpan | None = None
    step: Angle | None = None
    start: Angle | None = None
    approach: ApproachText = "either"
    settle: Duration = 0.0

    @model_validator(mode="after")
    def _has_angles(self) -> "WrittenAxis":
        _ = self.angles_deg
        return self

    @property
    def angles_deg(self) -> tuple[float, ...]:
        """The angles in the order of the visits."""
        return angles_of(turn=self.turn, values=self.values, span=self.range, step=self.step, start=self.start)


Sweep = Annotated[list[dict[str, WrittenAxis]], Field(min_length=1)]


class WrittenStep(Written):
    """One sweep with a name."""

    name: WordText
    sweep: Sweep


class WrittenDwell(Written):
    """How long to average."""

    time: Time
    at_least: Readings


class WrittenDark(Written):
    """When the beam is blocked, and by what."""

    by: WordText
    before: SwitchText = True
    after: SwitchText = True


class WrittenRecipe(Written):
    """A whole recipe."""

    recipe: TitleText
    roles: dict[str, Annotated[WrittenRole, BeforeValidator(_role, json_schema_input_type=RoleForms)]]
    source: WrittenSource
    optics: Annotated[list[WrittenElement], Field(min_length=1)]
    sweep: Sweep | None = None
    steps: Annotated[list[WrittenStep], Field(min_length=1)] | None = None
    dwell: WrittenDwell
    dark: WrittenDark | None = None
