"""The optics of a recipe as they are written: the light's way from the source to the detectors.

It owns the shape of each element; what elements mean for each other is checked elsewhere.
"""

from typing import Annotated

from pydantic import BeforeValidator, Field, model_validator

from rigctl.files.leaves import NameText, WordText, exactly_one, measured, quantity, shown
from rigctl.files.recipe import ElementKind
from rigctl.files.written import Words, Written
from rigctl.quantities import Measured

PICK_OFF = "pick-off"
"""Name of a pick-off that has none of its own: most benches have one."""

Angle = Annotated[float, quantity("angle"), shown("90 deg")]
Temperature = Annotated[float, quantity("temperature"), shown("25 degC")]
MeasuredAngle = Annotated[Measured, measured("angle"), shown("0 deg +- 5 deg")]
MeasuredRatio = Annotated[Measured, measured("ratio"), shown("1000:1 +- 30 %")]
MeasuredFraction = Annotated[Measured, measured("ratio", is_positive=True), shown("4 %")]
MeasuredRetardance = Annotated[Measured, measured("retardance"), shown("0.25 waves")]
MeasuredStray = Annotated[Measured, measured("power"), shown("20 nW")]
MeasuredCoefficient = Annotated[Measured, measured("coefficient"), shown("-100 ppm/K +- 50 ppm/K")]


class WrittenFlip(Written):
    """At which angles a rotation stage holds an element in the beam and out of it; a slide knows by itself."""

    in_: Annotated[Angle | None, Field(alias="in")] = None
    out: Angle | None = None


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

    name: NameText
    turned_by: WordText | None = None
    axis: MeasuredAngle | None = None
    dial_offset: MeasuredAngle | None = None
    taken_out_by: Takers | None = None
    unknown: Words = Field(default_factory=list)
    each: Each = Field(default_factory=dict)


class WrittenPolarizer(WrittenPlate):
    """A polarizer."""

    extinction_ratio: MeasuredRatio


class WrittenRetarder(WrittenPlate):
    """A retarder; its retardance may go with the temperature of what warms it."""

    retardance: MeasuredRetardance
    warmed_by: WordText | None = None
    temperature_coefficient: MeasuredCoefficient | None = None
    reference_temperature: Temperature | None = None


class WrittenPickOff(Written):
    """What sends a part of the light to a power meter of its own, and lets the rest go on."""

    name: NameText = PICK_OFF
    to: WordText
    fraction: MeasuredFraction
    unknown: Words = Field(default_factory=list)
    each: Each = Field(default_factory=dict)


class WrittenDetector(Written):
    """A detector, at the end of the light's way."""

    role: WordText
    stray_light: MeasuredStray | None = None
    unknown: Words = Field(default_factory=list)
    each: Each = Field(default_factory=dict)


WrittenPart = WrittenPolarizer | WrittenRetarder | WrittenPickOff | WrittenDetector


class WrittenElement(Written):
    """One entry of the optics: its kind is its only key."""

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
