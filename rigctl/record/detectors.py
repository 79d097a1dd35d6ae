"""What a detector's dwells become in a table: mean, uncertainty, spread, count, range, flags, every
reading."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from rigctl.interfaces import Dwell, Flag
from rigctl.record.names import DETECTOR_SUFFIXES, free_names
from rigctl.record.variables import Array, Frame, Variable

WATTS = {"units": "W"}
_CENSORED = Flag.OVERLOAD | Flag.UNDERRANGE


@dataclass(frozen=True, slots=True)
class Readings:
    """Dwells of one detector as arrays, one entry a dwell; `levels_w` has a column for each reading.

    Powers in W, `middle_s` in s since the start. A mean that the readings do not bear is NaN.
    """

    levels_w: Array
    flags: Array
    range_w: Array
    middle_s: Array
    mean_w: Array
    sd_w: Array
    n: Array

    @classmethod
    def of(cls, dwells: Sequence[Dwell]) -> "Readings":
        """Return dwells as arrays."""
        flags = np.array([int(dwell.flags) for dwell in dwells], np.int16)
        levels_w = _levels(dwells)
        mean_w, sd_w, n = moments(levels_w, flags)
        return cls(
            levels_w=levels_w,
            flags=flags,
            range_w=np.array([dwell.range_w for dwell in dwells], float),
            middle_s=np.array([(dwell.began_s + dwell.ended_s) / 2.0 for dwell in dwells], float),
            mean_w=mean_w,
            sd_w=sd_w,
            n=n,
        )

    @property
    def u_w(self) -> Array:
        """Standard uncertainty of each mean, W; NaN where one reading tells no spread."""
        return self.sd_w / np.sqrt(np.maximum(self.n, 1))


@dataclass(frozen=True, slots=True)
class Detected:
    """A detector in a table: its name there, where its dwells stand, what they read, and the variables of that.

    `variables` begin with the mean; `reading` is the dimension of the readings within a dwell.
    """

    name: str
    role: str
    frame: Frame
    readings: Readings
    variables: tuple[Variable, ...]
    reading: Variable


def detected(frame: Frame, dwells: Sequence[Mapping[str, Dwell]], taken: Sequence[str]) -> list[Detected]:
    """Return what each detector of the header becomes.

    `dwells` has one entry for each of the frame's places; `taken` are names that are in use.
    """
    names = free_names(frame.header.detectors, suffixes=DETECTOR_SUFFIXES, taken=taken)
    found = []
    for name, role in zip(names, frame.header.detectors, strict=True):
        pairs = zip(frame.places, dwells, strict=True)
        placed = [(place, by_role[role]) for place, by_role in pairs if role in by_role]
        own = frame.at([place for place, _ in placed])
        readings = Readings.of([dwell for _, dwell in placed])
        width = np.arange(readings.levels_w.shape[-1], dtype=np.int32)
        reading = Variable(
            f"{name}_reading", (f"{name}_reading",), width, {"long_name": f"{role}, number of the reading"}
        )
        variables = _variables(own, name, role, readings)
        found.append(Detected(name, role, own, readings, variables, reading))
    return found


def _variables(frame: Frame, name: str, role: str, readings: Readings) -> tuple[Variable, ...]:
    flags = frame.fill(readings.flags, dtype=np.int16, empty=0)
    n = frame.fill(readings.n, dtype=np.int32, empty=0)

    def variable(suffix: str, values: Array, meaning: str, more: Mapping[str, object] = WATTS) -> Variable:
        return Variable(name + suffix, frame.dims, values, {**more, "long_name": f"{role}, {meaning}"})

    return (
        variable("", frame.fill(readings.mean_w), "mean power", power(frame)),
        variable("_errors", frame.fill(readings.u_w), "standard uncertainty of the mean"),
        variable("_sd", frame.fill(readings.sd_w), "sample standard deviation of the readings"),
        variable("_n", n, "number of readings", {}),
        variable("_range", frame.fill(readings.range_w), "full scale of the range"),
        variable("_flags", flags, "what is wrong with the readings", _flag_masks()),
        Variable(
            f"{name}_levels",
            (*frame.dims, f"{name}_reading"),
            frame.fill(readings.levels_w),
            {**WATTS, "long_name": f"{role}, every reading"},
        ),
    )


def power(frame: Frame) -> dict[str, object]:
    """Return the attributes of a power: its units, and whether it was simulated."""
    return {**WATTS, **({"simulated": np.int8(1)} if frame.header.is_simulated else {})}


def _flag_masks() -> dict[str, object]:
    masks = np.array([flag.value for flag in Flag], np.int16)
    return {"flag_masks": masks, "flag_meanings": " ".join(str(flag.name).lower() for flag in Flag)}


def _levels(dwells: Sequence[Dwell]) -> Array:
    """Return every reading, a row a dwell, NaN behind the last of a shorter one."""
    width = max([1, *(len(dwell.levels_w) for dwell in dwells)])
    if all(len(dwell.levels_w) == width for dwell in dwells):
        return np.array([dwell.levels_w for dwell in dwells], float).reshape(-1, width)
    levels = np.full((len(dwells), width), np.nan)
    for row, dwell in zip(levels, dwells, strict=True):
        row[: len(dwell.levels_w)] = dwell.levels_w
    return levels


def moments(levels: Array, flags: Array) -> tuple[Array, Array, Array]:
    """Mean, sample standard deviation and number of the readings of each dwell.

    A dwell that lost readings beyond an end of its range has no mean: those that are left would bias it.

    Parameters
    ----------
    levels
        Readings, NaN where there is none; shape (..., readings), W.
    flags
        Union of the readings' flags; shape (...).

    Source
    ------
    JCGM 100:2008 (GUM), 4.2.1 and 4.2.2.
    """
    is_reading = np.isfinite(levels)
    n = is_reading.sum(axis=-1, dtype=np.int32)
    with np.errstate(invalid="ignore", divide="ignore"):
        mean = np.where(is_reading, levels, 0.0).sum(axis=-1) / n
        deviation = np.where(is_reading, levels - mean[..., None], 0.0)
        sd = np.sqrt((deviation**2).sum(axis=-1) / np.where(n > 1, n - 1, np.nan))
    mean[(flags & int(_CENSORED)) != 0] = np.nan
    sd[np.isnan(mean)] = np.nan
    return mean, sd, n
