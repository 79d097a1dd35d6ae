"""A rig file as it is written, as far as every rig file has the same keys.

It owns the shape of the file; the keys that a driver or the simulated bench adds are read in
`rigctl.files.options`.
"""

from typing import Annotated, get_args

from pydantic import ConfigDict, Field

from rigctl.files.leaves import (
    AddressText,
    DateText,
    Shown,
    TitleText,
    WholeText,
    WordText,
    choice,
    quantity,
    span,
)
from rigctl.files.rig import OnStop
from rigctl.files.written import Written

LABEL_CLASSES = ("1", "1C", "1M", "2", "2M", "3R", "3B", "4", "I", "II", "IIa", "IIIa", "IIIb", "IV")
"""Laser classes of IEC 60825-1, edition 3, and of 21 CFR 1040.10, as labels show them; from memory."""

Power = Annotated[float, quantity("power", is_positive=True), Shown("5 mW")]
Ratio = Annotated[float, quantity("ratio", is_positive=True), Shown("3 %")]
Number = Annotated[float, quantity("number", is_positive=True), Shown("2")]


Current = Annotated[float, quantity("current", is_positive=True), Shown("45 mA")]
Voltage = Annotated[float, quantity("voltage", is_positive=True), Shown("2.5 V")]
Temperature = Annotated[float, quantity("temperature"), Shown("22 degC")]
TemperatureSpan = Annotated[tuple[float, float], span("temperature"), Shown("10 degC to 40 degC")]
LabelText = Annotated[str, choice(*LABEL_CLASSES), Shown("3B")]
OnStopText = Annotated[OnStop, choice(*get_args(OnStop)), Shown("keep regulating")]


class WrittenLimits(Written):
    """What an instrument may not exceed; which of the keys it has depends on its kind."""

    power: Power | None = Field(None, description="largest power on a power meter")
    current: Current | None = Field(None, description="largest current of a source")
    compliance: Voltage | None = Field(None, description="largest compliance voltage of a source")
    temperature: TemperatureSpan | None = Field(None, description="lowest and highest setpoint of a controller")


class WrittenDiodeLimits(Written):
    """What a diode may not exceed; without a largest current it is not driven at all."""

    current: Current = Field(description="largest current")
    power: Power | None = Field(None, description="largest power")
    compliance: Voltage | None = Field(None, description="largest voltage")
    temperature: TemperatureSpan | None = Field(
        None, description="lowest and highest temperature at which it is driven"
    )


class WrittenDiode(Written):
    """A diode on a current source."""

    on: WordText = Field(description="current source that drives it")
    limits: WrittenDiodeLimits = Field(description="what it may not exceed")
    class_on_label: LabelText = Field(
        description="laser class printed on its label, or on that of the laser it is built into"
    )


class WrittenRoom(Written):
    """The air around the bench."""

    humidity: Ratio = Field(description="relative humidity")
    temperature: Temperature = Field(description="temperature of the air")


class WrittenCalibration(Written):
    """What a certificate says."""

    certificate: WordText = Field(description="number of the certificate")
    due: DateText = Field(description="when the next calibration is due")
    expanded_uncertainty: Ratio = Field(description="relative expanded uncertainty")
    coverage_factor: Number = Field(description="its coverage factor")


class WrittenInstrument(Written):
    """One instrument; its driver adds keys of its own."""

    model_config = ConfigDict(extra="allow")

    driver: WordText = Field(description="name of an installed driver")
    at: AddressText = Field(description="address")
    limits: WrittenLimits | None = Field(None, description="what it may not exceed")
    calibration: WrittenCalibration | None = Field(None, description="what its certificate says")


class WrittenSimulated(Written):
    """How the simulated bench differs from a good one; the bench adds keys of its own."""

    model_config = ConfigDict(extra="allow")

    seed: WholeText | None = Field(None, description="number from which a rehearsal draws its chances")


class WrittenRig(Written):
    """A whole rig file."""

    rig: TitleText = Field(description="title")
    instruments: dict[str, WrittenInstrument] = Field(min_length=1, description="instruments by name")
    diodes: dict[str, WrittenDiode] = Field(default_factory=dict, description="laser diodes by name")
    roles: dict[str, WordText] = Field(description="which instrument fills which role of the recipes")
    on_stop: dict[str, OnStopText] = Field(default_factory=dict, description="what controllers do at the end")
    room: WrittenRoom | None = Field(None, description="air around the bench")
    simulated: WrittenSimulated = Field(
        default_factory=WrittenSimulated, description="how the simulated bench differs from a good one"
    )
