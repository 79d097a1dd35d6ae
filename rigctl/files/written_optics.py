"""The optics of a recipe as they are written: the light's way from the source to the detectors.

It owns the shape of each element; what elements mean for each other is checked elsewhere.
"""

from typing import Annotated

from pydantic import BeforeValidator, ConfigDict, Field, model_validator

from rigctl.files.leaves import NameText, Shown, WordText, exactly_one, measured, quantity
from rigctl.files.recipe import ElementKind
from rigctl.files.written import Words, Written
from rigctl.quantities import Measured

PICK_OFF = "pick-off"
"""Name of a pick-off that has none of its own: most benches have one."""

Angle = Annotated[float, quantity("angle"), Shown("90 deg")]
Temperature = Annotated[float, quantity("temperature"), Shown("25 degC")]
MeasuredAngle = Annotated[Measured, measured("angle"), Shown("0 deg +- 5 deg")]
MeasuredRatio = Annotated[Measured, measured("ratio"), Shown("1000:1 +- 30 %")]
MeasuredFraction = Annotated[Measured, measured("ratio", is_positive=True), Shown("4 %")]
MeasuredRetardance = Annotated[Measured, measured("retardance"), Shown("0.25 waves")]
MeasuredStray = Annotated[Measured, measured("power"), Shown("20 nW")]
MeasuredCoefficient = Annotated[Measured, measured("coefficient"), Shown("-100 ppm/K +- 50 ppm/K")]


class WrittenFlip(Written):
    """At which angles a rotation stage holds an element in the beam and out of it; a slide knows by itself."""

    in_: Annotated[Angle | None, Field(description="angle at which the element is in the beam", alias="in")] = None
    out: Angle | None = Field(None, description="angle at which it is out of the beam")


def _takers(value: object) -> object:
    """A slide may be written as its name alone."""
    return {value: {}} if isinstance(value, str) else value


Takers = Annotated[
    dict[str, WrittenFlip],
    Field(min_length=1, max_length=1),
    BeforeValidator(_takers, json_schema_input_type=WordText | dict[str, WrittenFlip]),
]
Each = dict[str, WordText]


class WrittenPlate(Written):
    """An element in the beam, fixed or turned."""

    name: NameText = Field(description="name of the element, for addresses such as part.retardance")
    turned_by: WordText | None = Field(None, description="role of the mount that turns it")
    axis: MeasuredAngle | None = Field(None, description="its axis in the light, or on its mount at dial 0")
    dial_offset: MeasuredAngle | None = Field(None, description="dial angle at which its axis is at 0")
    taken_out_by: Takers | None = Field(
        None, description="role of the slide or mount that takes it out of the beam; otherwise somebody does"
    )
    unknown: Words = Field(default_factory=list, description="quantities that are to be found")
    each: Each = Field(
        default_factory=dict, description="quantities found anew at each level of a role, or in each step"
    )


class WrittenPolarizer(WrittenPlate):
    """A polarizer."""

    extinction_ratio: MeasuredRatio = Field(description="parallel over crossed transmission")


class WrittenRetarder(WrittenPlate):
    """A retarder; its retardance may go with the temperature of what warms it."""

    retardance: MeasuredRetardance = Field(description="retardance, in waves, deg or nm")
    warmed_by: WordText | None = Field(None, description="role of what sets its temperature")
    temperature_coefficient: MeasuredCoefficient | None = Field(
        None, description="relative change of the retardance per kelvin"
    )
    reference_temperature: Temperature | None = Field(
        None, description="temperature of the stated retardance; 25 degC where it is left out"
    )


class WrittenPickOff(Written):
    """What sends a part of the light to a power meter of its own, and lets the rest go on."""

    name: NameText = Field(PICK_OFF, description="name of the pick-off, where there are several")
    to: WordText = Field(description="role of the power meter that gets the light")
    fraction: MeasuredFraction = Field(description="part of the light that is sent there")
    unknown: Words = Field(default_factory=list, description="fraction, where it is to be found")
    each: Each = Field(
        default_factory=dict, description="fraction, found anew at each level of a role, or in each step"
    )


class WrittenDetector(Written):
    """A detector, at the end of the light's way."""

    role: WordText = Field(description="role of the power meter")
    stray_light: MeasuredStray | None = Field(None, description="light that reaches it beside the beam")
    unknown: Words = Field(default_factory=list, description="stray light, where it is to be reported")
    each: Each = Field(default_factory=dict, description="stray light, found anew in each step")


WrittenPart = WrittenPolarizer | WrittenRetarder | WrittenPickOff | WrittenDetector


class WrittenElement(Written):
    """One entry of the optics: its kind is its only key."""

    model_config = ConfigDict(json_schema_extra={"minProperties": 1, "maxProperties": 1})

    polarizer: WrittenPolarizer | None = None
    retarder: WrittenRetarder | None = None
    pick_off: Annotated[WrittenPickOff | None, Field(alias="pick-off")] = None
    detector: WrittenDetector | None = None

    @model_validator(mode="after")
    def _has_one_kind(self) -> "WrittenElement":
        kinds = {name: field.alias or name for name, field in type(self).model_fields.items()}
        exactly_one(list(kinds.values()), sorted(kinds[name] for name in self.model_fields_set))
        return self

    @property
    def one(self) -> tuple[ElementKind, WrittenPart]:
        """Its kind and what is said of it."""
        found: tuple[tuple[ElementKind, WrittenPart | None], ...] = (
            ("polarizer", self.polarizer),
            ("retarder", self.retarder),
            ("pick-off", self.pick_off),
            ("detector", self.detector),
        )
        return next((kind, part) for kind, part in found if part is not None)
