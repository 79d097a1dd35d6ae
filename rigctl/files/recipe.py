"""What a recipe says, as checked values.

It owns the nouns that the runner, the bench and the fit read; it reads no file and checks nothing.
`rigctl.files.recipe_reading` makes them.
"""

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Literal

from rigctl.files.places import Keys, Places
from rigctl.interfaces import RoleKind
from rigctl.quantities import Measured

ElementKind = Literal["polarizer", "retarder", "pick-off", "detector"]
Approach = Literal["from below", "from above", "either"]
AxisKind = Literal["angle", "temperature", "current", "repeat"]
OrderKind = Literal["as written", "interleaved", "shuffled"]
DarkKind = Literal["dark", "background", "zero"]

AXIS_KINDS: Mapping[RoleKind, AxisKind] = {
    "rotation stage": "angle",
    "temperature controller": "temperature",
    "current source": "current",
}
"""What is set by a role of a kind, where a sweep or a preparation sets it."""
BY_HAND = "hand"
"""How a dark is taken where no shutter does it: a person blocks the beam."""


@dataclass(frozen=True, slots=True)
class Role:
    """What must stand on the bench for a name of the recipe; an optional one may be left out."""

    kind: RoleKind
    is_optional: bool = False


@dataclass(frozen=True, slots=True)
class Source:
    """The light: wavelength in m, power in W on the first element, drift in 1/h.

    `driven_by` is the role of the current source, `cooled_by` that of the controller that keeps its temperature.
    """

    wavelength: Measured
    power: Measured | None = None
    drift: Measured | None = None
    driven_by: str | None = None
    cooled_by: str | None = None


@dataclass(frozen=True, slots=True)
class OpticalElement:
    """One element in the light's way; what its kind does not have is None.

    Angles in deg, retardance in waves, extinction ratio as crossed over parallel transmission, stray light
    in W, temperature coefficient in 1/K. A detector bears the name of its role; a pick-off sends `fraction` of
    the light to the power meter of the role `to`. What a slide (or a rotation stage, at `out_deg`) takes out of
    the beam and puts back (at `in_deg`) names it in `taken_out_by`. `each` tells which quantities are found anew
    at each level of a role, or in each step.
    """

    kind: ElementKind
    name: str
    turned_by: str | None = None
    axis: Measured | None = None
    dial_offset: Measured | None = None
    extinction_ratio: Measured | None = None
    retardance: Measured | None = None
    role: str | None = None
    stray_light: Measured | None = None
    unknown: tuple[str, ...] = ()
    to: str | None = None
    fraction: Measured | None = None
    warmed_by: str | None = None
    temperature_coefficient: Measured | None = None
    reference_temperature_c: float | None = None
    taken_out_by: str | None = None
    in_deg: float | None = None
    out_deg: float | None = None
    each: Mapping[str, str] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class Steady:
    """When a temperature counts as reached: how near and how flat, for how long, and when to give up."""

    within_k: float
    for_s: float
    give_up_s: float
    slope_k_per_s: float | None = None


@dataclass(frozen=True, slots=True)
class Axis:
    """The values of one role in the order of a sweep: deg, degC, A, or the numbers of repeats.

    A repeat has no role. A mount rests `settle_s` after each move.
    """

    role: str
    kind: AxisKind
    values: tuple[float, ...]
    approach: Approach = "either"
    settle_s: float = 0.0
    steady: Steady | None = None
    ramp_a_per_s: float | None = None


@dataclass(frozen=True, slots=True)
class Preparation:
    """What a role is set to before the steps: degC or A; the bench warms up for `warm_up_s` once it is there."""

    role: str
    to: float
    steady: Steady | None = None
    ramp_a_per_s: float | None = None
    warm_up_s: float = 0.0


@dataclass(frozen=True, slots=True)
class Order:
    """In which order the last axis of a step is visited; `number` is the stride or the seed."""

    kind: OrderKind = "as written"
    number: int = 1


@dataclass(frozen=True, slots=True)
class Step:
    """One sweep with a name of its own; the first axis turns slowest.

    `without` are elements that are out of the beam; `goes_on_unattended` tells what to do when nobody is there
    to take them out.
    """

    name: str
    sweep: tuple[Axis, ...]
    order: Order = field(default_factory=Order)
    without: tuple[str, ...] = ()
    goes_on_unattended: bool = False


@dataclass(frozen=True, slots=True)
class DwellPlan:
    """How long to average at each visit, s, and in how many readings at least."""

    time_s: float
    readings: int


@dataclass(frozen=True, slots=True)
class Dark:
    """When no light is let to the detectors, and by what.

    A dark blocks the beam: by a role of kind shutter, or `hand`. A background switches the source off, by
    nothing else. A zero caps the detectors, by `hand`.
    """

    kind: DarkKind
    by: str
    before: bool = True
    after: bool = True
    every_s: float | None = None


@dataclass(frozen=True, slots=True)
class Recipe:
    """A checked recipe, with its text as it was written and where each part of it stands.

    `tolerances` and `targets` are by address of the quantity, in its base unit: what decides, and how well it is
    to be known.
    """

    title: str
    roles: Mapping[str, Role]
    source: Source
    optics: tuple[OpticalElement, ...]
    preparations: tuple[Preparation, ...]
    steps: tuple[Step, ...]
    dwell: DwellPlan
    darks: tuple[Dark, ...]
    tolerances: Mapping[str, tuple[float, float]]
    targets: Mapping[str, float]
    text: str
    path: str
    sha256: str
    places: Places

    def keys_of_step(self, number: int) -> Keys:
        """The keys that lead to a step in the file; a sweep alone stands in the recipe itself."""
        return () if self.places.has("sweep") else ("steps", number)

    def place(self, *keys: str | int) -> tuple[int, int]:
        """Line and column of what stands under these keys of the file, or of the nearest part above it."""
        return self.places.of(*keys)
