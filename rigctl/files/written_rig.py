"""A rig file as it is written, as far as every rig file has the same keys.

It owns the shape of the file; the keys that a driver or the simulated bench adds are read in
`rigctl.files.options`.
"""

from typing import Annotated

from pydantic import ConfigDict, Field

from rigctl.files.leaves import AddressText, DateText, TitleText, WholeText, WordText, quantity, shown
from rigctl.files.written import Written

Power = Annotated[float, quantity("power", is_positive=True), shown("5 mW")]
Ratio = Annotated[float, quantity("ratio", is_positive=True), shown("3 %")]
Number = Annotated[float, quantity("number", is_positive=True), shown("2")]


class WrittenLimits(Written):
    """What an instrument may not exceed."""

    power: Power


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
    roles: dict[str, WordText]
    simulated: WrittenSimulated = Field(default_factory=WrittenSimulated)
