"""What a detector's dwells become in a table: mean, uncertainty, spread, count, range, flags, every
reading."""

from collections.abc import Mapping, Sequence

import numpy as np

from rigctl.interfaces import Dwell, Flag
from rigctl.record.names import DETECTOR_SUFFIXES, free_names
from rigctl.record.variables import Array, Frame, Variable

_CENSORED = Flag.OVERLOAD | Flag.UNDERRANGE
_WATTS = {"units": "W"}


def detector_variables(
    frame: Frame, dwells: Sequence[Mapping[str, Dwell]], taken: Sequence[str]
) -> list[tuple[Variable, ...]]:
    """Return the variables of each detector: the mean first, the dimension of the readings last.

    `dwells` has one entry for each of the frame's places; `taken` are names that are in use.
    """
    names = free_names(frame.header.detectors, suffixes=DETECTOR_SUFFIXES, taken=taken)
    groups = []
    for name, role in zip(names, frame.header.detectors, strict=True):
        pairs = zip(frame.places, dwells, strict=True)
        placed = [(place, by_role[role]) for place, by_role in pairs if role in by_role]
        own = frame.at([place for place, _ in placed])
        groups.append(_variables(own, name, role, [dwell for _, dwell in placed]))
    return groups


def _variables(frame: Frame, name: str, role: str, dwells: Sequence[Dwell]) -> tuple[Variable, ...]:
    levels = _levels(frame, dwells)
    flags = frame.fill([int(dwell.flags) for dwell in dwells], dtype=np.int16, empty=0)
    ranges = frame.fill([dwell.range_w for dwell in dwells])
    mean, sd, n = moments(levels, flags)
    reading = f"{name}_reading"
    readings = np.arange(levels.shape[-1], dtype=np.int32)

    def variable(suffix: str, values: Array, meaning: str, more: Mapping[str, object] = _WATTS) -> Variable:
        return Variable(name + suffix, frame.dims, values, {**more, "long_name": f"{role}, {meaning}"})

    return (
        variable("", mean, "mean power", _power(frame)),
        variable("_errors", sd / np.sqrt(np.maximum(n, 1)), "standard uncertainty of the mean"),
        variable("_sd", sd, "sample standard deviation of the readings"),
        variable("_n", n, "number of readings", {}),
        variable("_range", ranges, "full scale of the range"),
        variable("_flags", flags, "what is wrong with the readings", _flag_masks()),
        Variable(
            f"{name}_levels",
            (*frame.dims, reading),
            levels,
            {**_WATTS, "long_name": f"{role}, every reading"},
        ),
        Variable(reading, (reading,), readings, {"long_name": f"{role}, number of the reading"}),
    )


def _power(frame: Frame) -> dict[str, object]:
    return {**_WATTS, **({"simulated": np.int8(1)} if frame.header.is_simulated else {})}


def _flag_masks() -> dict[str, object]:
    masks = np.array([flag.value for flag in Flag], np.int16)
    return {"flag_masks": masks, "flag_meanings": " ".join(str(flag.name).lower() for flag in Flag)}


def _levels(frame: Frame, dwells: Sequence[Dwell]) -> Array:
    width = max([1, *(len(dwell.levels_w) for dwell in dwells)])
    levels = np.full((int(np.prod(frame.shape)), width), np.nan)
    for place, dwell in zip(frame.places, dwells, strict=True):
        levels[place, : len(dwell.levels_w)] = dwell.levels_w
    return levels.reshape(*frame.shape, width)


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
