"""What a rig file says, as checked values.

It owns the nouns; it reads no file and checks nothing. `rigctl.files.rig_reading` makes them.
"""

from collections.abc import Mapping
from dataclasses import dataclass
from datetime import date
from typing import Any, Literal

from rigctl.files.places import Places


@dataclass(frozen=True, slots=True)
class Calibration:
    """A certificate: its number, when the next is due, and the relative uncertainty it states."""

    certificate: str
    due: date
    expanded_uncertainty: float
    coverage_factor: float


OnStop = Literal["keep regulating", "switch off"]


@dataclass(frozen=True, slots=True)
class InstrumentEntry:
    """One instrument of the bench.

    `options` are typed by the driver's table, in base units, with every default filled in; `limits` are what
    it may not exceed, by quantity, in base units: `power` of a power meter, `current` and `compliance` of a
    current source, `temperature` (lowest and highest) of a temperature controller.
    """

    name: str
    driver: str
    at: str
    options: Mapping[str, Any]
    limits: Mapping[str, float | tuple[float, float]]
    calibration: Calibration | None = None


@dataclass(frozen=True, slots=True)
class Diode:
    """A laser diode on a current source, and what it may not exceed.

    `label_class` is the laser class printed on its label, as a person read it there.
    """

    name: str
    on: str
    current_a: float
    power_w: float | None
    compliance_v: float | None
    temperature_c: tuple[float, float] | None
    label_class: str


@dataclass(frozen=True, slots=True)
class Room:
    """The air around the bench: relative humidity as a ratio, temperature in degC."""

    humidity: float
    temperature_c: float


@dataclass(frozen=True, slots=True)
class SimulatedSection:
    """How the simulated bench differs from a good one: keys of the bench, and of each instrument."""

    seed: int | None
    bench: Mapping[str, Any]
    instruments: Mapping[str, Mapping[str, Any]]


@dataclass(frozen=True, slots=True)
class Rig:
    """A checked rig file, with its text as it was written and where each part of it stands."""

    title: str
    instruments: Mapping[str, InstrumentEntry]
    diodes: Mapping[str, Diode]
    roles: Mapping[str, str]
    on_stop: Mapping[str, OnStop]
    room: Room | None
    simulated: SimulatedSection
    text: str
    path: str
    sha256: str
    places: Places

    def entry(self, role: str) -> InstrumentEntry | None:
        """Return the instrument that fills a role; None where the rig fills it with nothing."""
        name = self.roles.get(role)
        return None if name is None else self.instruments[name]

    def diode(self, role: str) -> Diode | None:
        """Return the diode on the source that fills a role; None where the rig names none."""
        name = self.roles.get(role)
        return next((diode for diode in self.diodes.values() if diode.on == name), None)

    def place(self, *keys: str | int) -> tuple[int, int]:
        """Line and column of what stands under these keys of the file, or of the nearest part above it."""
        return self.places.of(*keys)
