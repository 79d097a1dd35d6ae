"""What a recipe says, as checked values.

It owns the nouns that the runner, the bench and the fit read; it reads no file and checks nothing.
`rigctl.files.recipe_reading` makes them.
"""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Literal

from rigctl.files.places import Places
from rigctl.interfaces import RoleKind
from rigctl.quantities import Measured

ElementKind = Literal["polarizer", "retarder", "detector"]
Approach = Literal["from below", "from above", "either"]

BY_HAND = "hand"
"""How a dark is taken where no shutter does it: a person blocks the beam."""


@dataclass(frozen=True, slots=True)
class Role:
    """What must stand on the bench for a name of the recipe; an optional one may be left out."""

    kind: RoleKind
    is_optional: bool = False


@dataclass(frozen=True, slots=True)
class Source:
    """The light: wavelength in m, power in W on the first element, drift in 1/h."""

    wavelength: Measured
    power: Measured | None = None
    drift: Measured | None = None


@dataclass(frozen=True, slots=True)
class OpticalElement:
    """One element in the light's way; what its kind does not have is None.

    Angles in deg, retardance in waves, extinction ratio as crossed over parallel transmission, stray light
    in W. A detector bears the name of its role.
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


@dataclass(frozen=True, slots=True)
class Axis:
    """The angles of one mount in the order of a sweep, deg; the mount rests `settle_s` after each move."""

    role: str
    angles_deg: tuple[float, ...]
    approach: Approach = "either"
    settle_s: float = 0.0


@dataclass(frozen=True, slots=True)
class Step:
    """One sweep with a name of its own; the first axis turns slowest."""

    name: str
    sweep: tuple[Axis, ...]


@dataclass(frozen=True, slots=True)
class DwellPlan:
    """How long to average at each visit, s, and in how many readings at least."""

    time_s: float
    readings: int


@dataclass(frozen=True, slots=True)
class Dark:
    """When the beam is blocked at the source, and by what: a role of kind shutter, or `hand`."""

    by: str
    before: bool = True
    after: bool = True


@dataclass(frozen=True, slots=True)
class Recipe:
    """A checked recipe, with its text as it was written and where each part of it stands."""

    title: str
    roles: Mapping[str, Role]
    source: Source
    optics: tuple[OpticalElement, ...]
    steps: tuple[Step, ...]
    dwell: DwellPlan
    dark: Dark | None
    text: str
    path: str
    sha256: str
    places: Places

    def place(self, *keys: str | int) -> tuple[int, int]:
        """Line and column of what stands under these keys of the file, or of the nearest part above it."""
        return self.places.of(*keys)
