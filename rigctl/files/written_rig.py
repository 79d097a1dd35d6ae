"""A rig file as it is written, as far as every rig file has the same keys.

It owns the shape of the file; the keys that a driver or the simulated bench adds are read in
`rigctl.files.options`.
"""

from typing import Annotated, get_args

from pydantic import ConfigDict, Field

from rigctl.files.leaves import (
    AddressText,
    DateText,
    TitleText,
    WholeText,
    WordText,
    choice,
    quantity,
    shown,
    span,
)
from rigctl.files.rig import OnStop
from rigctl.files.written import Written

LABEL_CLASSES = ("1", "1C", "1M", "2", "2M", "3R", "3B", "4", "I", "II", "IIa", "IIIa", "IIIb", "IV")
"""Laser classes of IEC 60825-1, edition 3, and of 21 CFR 1040.10, as labels show them; from memory."""

Power = Annotated[float, quantity("power", is_positive=True), shown("5 mW")]
Ratio = Annotated[float, quantity("ratio", is_positive=True), shown("3 %")]
Number = Annotated[float, quantity("number", is_positive=True), shown("2")]


Current = Annotated[float, quantity("current", is_positive=True), shown("45 mA")]
Voltage = Annotated[float, quantity("voltage", is_positive=True), shown("2.5 V")]
Temperature = Annotated[float, quantity("temperature"), shown("22 degC")]
TemperatureSpan = Annotated[tuple[float, float], span("temperature"), shown("10 degC to 40 degC")]
LabelText = Annotated[str, choice(*LABEL_CLASSES), shown("3B")]
OnStopText = Annotated[OnStop, choice(*get_args(OnStop)), shown("keep regulating")]


class WrittenLimits(Written):
    """What an instrument may not exceed; which of the keys it has depends on its kind."""

    power: Power | None = None
    current: Current | None = None
    compliance: Voltage | None = None
    temperature: TemperatureSpan | None = None


class WrittenDiodeLimits(Written):
    """What a diode may not exceed; without a largest current it is not driven at all."""

    current: Current
    power: Power | None = None
    compliance: Voltage | None = None
    temperature: TemperatureSpan | None = None


class WrittenDiode(Written):
    """A diode on a current source."""

    on: WordText
    limits: WrittenDiodeLimits
    class_on_label: LabelText


class WrittenRoom(Written):
    """The air around the bench."""

    humidity: Ratio
    temperature: Temperature


class WrittenCalibration(Written):
    """What a certificate says."""

    certificate: WordText
    due: DateText
    expanded_uncertainty: Ratio
    coverage_factor: Number


class WrittenInstrument(Written):
    """One instrument; its driver adds keys of its own."""

    model_config = ConfigDict(extra="allow")

    driver: WordText
    at: AddressText
    limits: WrittenLimits | None = None
    calibration: WrittenCalibration | None = None


class WrittenSimulated(Written):
    """How the simulated bench differs from a good one; the bench adds keys of its own."""

    model_config = ConfigDict(extra="allow")

    seed: WholeText | None = None


class WrittenRig(Written):
    """A whole rig file."""

    rig: TitleText
    instruments: Annotated[dict[str, WrittenInstrument], Field(min_length=1)]
    diodes: dict[str, WrittenDiode] = Field(default_factory=dict)
    roles: dict[str, WordText]
    on_stop: dict[str, OnStopText] = Field(default_factory=dict)
    room: WrittenRoom | None = None
    simulated: WrittenSimulated = Field(default_factory=WrittenSimulated)
