"""What a driver implements and what a simulated bench offers: the contracts between the core and its plugins.

Plain synchronous Python. A driver never sleeps and never waits for physics: what takes time returns `Begun`,
and the runner polls it when it is due. Angles are degrees in the bench's sense (positive is counter-clockwise
to an eye facing the light), powers watts, times seconds, instants seconds since the run began.
"""

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from typing import Any, Generic, Literal, Protocol, TypeVar

from rigctl.capabilities import (
    Capabilities,
    ControllerCapabilities,
    MeterCapabilities,
    ShutterCapabilities,
    SourceCapabilities,
    StageCapabilities,
    SwitchCapabilities,
)
from rigctl.kinds import Sign
from rigctl.links.channel import Twin
from rigctl.links.family import Family
from rigctl.links.link import Link
from rigctl.readings import ControllerConditions, Dwell, Flag, Identity, SourceConditions

__all__ = [
    "Begun",
    "Bench",
    "BenchFactory",
    "Capabilities",
    "ControllerCapabilities",
    "ControllerConditions",
    "CurrentSource",
    "Driver",
    "Dwell",
    "Flag",
    "Identity",
    "Instrument",
    "MeterCapabilities",
    "Option",
    "Options",
    "PowerMeter",
    "Relay",
    "RoleKind",
    "RotationStage",
    "Shutter",
    "ShutterCapabilities",
    "Slide",
    "SourceCapabilities",
    "SourceConditions",
    "StageCapabilities",
    "SwitchCapabilities",
    "TemperatureController",
]

T = TypeVar("T")

RoleKind = Literal[
    "rotation stage", "power meter", "shutter", "current source", "temperature controller", "relay", "slide"
]


@dataclass(frozen=True, slots=True)
class Begun(Generic[T]):
    """Something under way.

    `poll` makes at most one short exchange and returns the value, or None while there is none yet. It is first
    called at `due_s`, then every `again_s`, until `give_up_s`.
    """

    due_s: float
    poll: Callable[[], T | None]
    again_s: float
    give_up_s: float


class Instrument(Protocol):
    """What every driver offers; `make_safe` is called at every ending, whatever else failed."""

    def identify(self) -> Identity:
        """Ask who is there; raises `WrongInstrumentError` when it cannot be this kind."""

    def settings(self) -> Mapping[str, str | float]:
        """Read back the settings that matter to an analyst, for the run file."""


class RotationStage(Instrument, Protocol):
    """A mount that turns."""

    capabilities: StageCapabilities

    def begin_move(self, angle_deg: float) -> Begun[float]:
        """Start a move; yields the angle reached, deg. Raises `MotionError` on an alarm."""

    def begin_home(self) -> Begun[float]:
        """Start the search for the mount's own zero; yields the angle afterwards, deg."""

    def angle_deg(self) -> float:
        """Read the angle now."""

    def is_homed(self) -> bool:
        """Whether the angle can be trusted."""

    def stop(self) -> None:
        """Stop turning now; returns once the mount acknowledges it."""


class PowerMeter(Instrument, Protocol):
    """A head that reads power."""

    capabilities: MeterCapabilities

    def set_wavelength(self, wavelength_m: float) -> None:
        """Set the wavelength of the light and read it back."""

    def set_range(self, full_scale_w: float | None) -> float:
        """Fix the smallest range that holds a power (None: automatic) and return its full scale, W."""

    def set_dwell(self, readings: int, aperture_s: float) -> None:
        """Arrange for dwells of `readings` readings, each integrated over `aperture_s`."""

    def begin_dwell(self) -> Begun[Dwell]:
        """Start a block of readings."""


class Shutter(Instrument, Protocol):
    """A shutter before everything else in the light's way."""

    capabilities: ShutterCapabilities

    def begin_set(self, is_open: bool) -> Begun[bool]:
        """Start to open or close; yields the state read back."""

    def is_open(self) -> bool:
        """Read the state back now."""


class CurrentSource(Instrument, Protocol):
    """What drives a diode. The runner never uses it bare: every setpoint passes `rigctl.runner.limits`."""

    capabilities: SourceCapabilities

    def set_limit(self, current_a: float) -> float:
        """Program the instrument's own current limit and return it as read back, A."""

    def set_compliance(self, voltage_v: float) -> float:
        """Program the compliance voltage and return it as read back, V."""

    def set_current(self, current_a: float) -> float:
        """Set the current and return the setpoint as read back, A."""

    def set_output(self, is_on: bool) -> bool:
        """Switch the output and return its state as read back."""

    def conditions(self) -> SourceConditions:
        """Read everything that tells how the diode is doing."""


class TemperatureController(Instrument, Protocol):
    """What keeps a diode or an oven at a temperature. Raises `InstrumentError` for a sensor open or shorted."""

    capabilities: ControllerCapabilities

    def set_span(self, low_c: float, high_c: float) -> None:
        """Program the instrument's own temperature limits and read them back."""

    def set_temperature(self, temperature_c: float) -> float:
        """Set the setpoint and return it as read back, degC."""

    def set_output(self, is_on: bool) -> bool:
        """Start or end regulating and return the state as read back."""

    def conditions(self) -> ControllerConditions:
        """Read temperature, sensor resistance and state."""


class Relay(Instrument, Protocol):
    """A contact."""

    capabilities: SwitchCapabilities

    def begin_set(self, is_closed: bool) -> Begun[bool]:
        """Start to close or open the contact; yields the state read back."""

    def is_closed(self) -> bool:
        """Read the state back now."""


class Slide(Instrument, Protocol):
    """What takes an element out of the beam and puts it back."""

    capabilities: SwitchCapabilities

    def begin_set(self, is_in: bool) -> Begun[bool]:
        """Start to put the element in or out; yields whether it is in, as read back."""

    def is_in(self) -> bool:
        """Read the state back now."""


@dataclass(frozen=True, slots=True)
class Option:
    """One key that a driver or twin accepts in the rig file.

    `kind` is a quantity kind of `rigctl.quantities` (its value arrives in that kind's base unit), a span of one
    (`span of angle`), a list of one (`list of power`), `text`, `whole number`, `choice` or `thermistor`.
    `sign` is what a number of it may be where the kind itself allows more.
    """

    kind: str
    default: Any = None
    choices: tuple[str, ...] = ()
    meaning: str = ""
    sign: Sign = "any"


Options = Mapping[str, Any]


@dataclass(frozen=True, slots=True)
class Driver:
    """A driver as plugins declare it under the entry point group `rigctl.drivers`.

    `capabilities` works from the rig file alone, so that `check` needs no bench; `open` takes hold of the
    instrument on its link, which every channel behind the same address shares.
    """

    name: str
    kind: RoleKind
    family: Family
    options: Mapping[str, Option]
    capabilities: Callable[[Options], Capabilities]
    open: Callable[[Link, Options], Instrument]
    meaning: str = field(default="", kw_only=True)


class Bench(Protocol):
    """A simulated bench: one world, and a twin for each address of the rig."""

    def twin(self, address: str) -> Twin:
        """Return what stands at an address of the rig file."""

    def truth(self) -> Mapping[str, float]:
        """Return the hidden value of every quantity of the train, by name, in its kind's base unit."""

    def emits(self, now_s: float) -> bool:
        """Whether the source is on; of a source that nobody drives, whether its light is let in."""

    def block_by_hand(self, is_blocked: bool, now_s: float) -> None:
        """A person puts something into the beam, or takes it away."""

    def cap_by_hand(self, is_capped: bool, now_s: float) -> None:
        """A person puts a cap on every detector, or takes them off."""

    def take_out_by_hand(self, element: str, is_out: bool, now_s: float) -> None:
        """A person takes an element out of the beam, or puts it back."""


class BenchFactory(Protocol):
    """What a simulated bench declares under the entry point group `rigctl.benches`."""

    def twin_options(self, driver: str) -> Mapping[str, Option]:
        """Keys that the rig file's `simulated:` accepts for an instrument of this driver."""

    def bench_options(self) -> Mapping[str, Option]:
        """Keys that the rig file's `simulated:` accepts for the bench as a whole."""

    def default_rig(self, roles: Mapping[str, RoleKind]) -> str:
        """Return the text of a rig file with a well-behaved instrument for each role."""

    def build(self, recipe: Any, rig: Any, seed: int) -> Bench:
        """Build a bench for a checked `Recipe` and `Rig`; its hidden truth is drawn from the seed."""
