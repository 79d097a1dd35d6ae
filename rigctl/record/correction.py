"""What a power becomes once its dark and the source's wander are taken off.

It owns the rule: corrected = (mean - dark) * factor. The dark is that on the range of the reading, linear in time
between the darks of the run; the factor is the mean of the monitor over the whole run, over the monitor at that
visit, each less its own dark, so that steps stay comparable. Where a part of it is missing the result is NaN.
The powers themselves stay as they were read.
"""

from bisect import bisect_left
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from itertools import groupby

import numpy as np

from rigctl.interfaces import Dwell
from rigctl.record.detectors import WATTS, Detected, Readings, power
from rigctl.record.records import Dark
from rigctl.record.run import Run
from rigctl.record.variables import Array, Variable

_DARKNESS = ("dark", "background")
"""What is subtracted: light kept off at the source, or no light at all; a capped detector misses the room's."""


@dataclass(frozen=True, slots=True)
class DarkTrack:
    """Darks of one detector on one range: instants in s, means in W and their variances in W2, oldest first."""

    times_s: Array
    means_w: Array
    variances_w2: Array

    def at(self, times_s: Array) -> tuple[Array, Array]:
        """Return the dark at these instants and its variance: linear between two, the nearest beyond the ends."""
        places = np.interp(times_s, self.times_s, np.arange(self.times_s.size))
        low = places.astype(int)
        high = np.minimum(low + 1, self.times_s.size - 1)
        share = places - low
        means_w = (1.0 - share) * self.means_w[low] + share * self.means_w[high]
        return means_w, (1.0 - share) ** 2 * self.variances_w2[low] + share**2 * self.variances_w2[high]


@dataclass(frozen=True, slots=True)
class Net:
    """Means less their darks, with the darks that were taken off: W, W2."""

    dark_w: Array
    dark_variance_w2: Array
    net_w: Array
    variance_w2: Array


def dark_tracks(run: Run, role: str) -> dict[float, DarkTrack]:
    """Return the darks of a detector by range: beam blocked, or source off where it was never blocked."""
    for what in _DARKNESS:
        tracks = _tracks([dark for dark in run.darks if dark.what == what and role in dark.dwells], run, role)
        if tracks:
            return tracks
    return {}


def corrections(run: Run, found: Sequence[Detected]) -> tuple[Variable, ...]:
    """Return the corrected powers of a step's detectors, with what they were corrected by."""
    monitor = next((one for one in found if one.role == run.header.monitor), None)
    if monitor is None:
        return tuple(variable for one in found for variable in _corrected(run, one, None))
    factor, u_factor = _factor(run, monitor)
    by_visit = (monitor.frame.fill(factor), monitor.frame.fill(u_factor))
    return tuple(variable for one in found for variable in _corrected(run, one, None if one is monitor else by_visit))


def _corrected(run: Run, one: Detected, by_visit: tuple[Array, Array] | None) -> tuple[Variable, ...]:
    frame, name, role = one.frame, one.name, one.role
    net = _net(one.readings, dark_tracks(run, role))
    ones = np.ones_like(net.net_w)
    places = list(frame.places)
    factor, u_factor = (ones, 0.0 * ones) if by_visit is None else (values.ravel()[places] for values in by_visit)
    u_w = np.sqrt(factor**2 * net.variance_w2 + (net.net_w * u_factor) ** 2)

    def variable(suffix: str, values: Array, meaning: str, more: Mapping[str, object] = WATTS) -> Variable:
        return Variable(name + suffix, frame.dims, frame.fill(values), {**more, "long_name": f"{role}, {meaning}"})

    return (
        variable("_corrected", net.net_w * factor, "(mean power - dark) * correction factor", power(frame)),
        variable("_corrected_errors", u_w, "standard uncertainty of the corrected power"),
        variable("_dark", net.dark_w, "dark on the range of the reading, interpolated in time"),
        variable("_dark_errors", np.sqrt(net.dark_variance_w2), "standard uncertainty of the dark"),
        variable("_correction_factor", factor, _meaning(run, by_visit), {"units": "1"}),
        variable("_correction_factor_errors", u_factor, "standard uncertainty of the factor", {"units": "1"}),
    )


def _meaning(run: Run, by_visit: object) -> str:
    return "correction factor" if by_visit is None else f"mean of '{run.header.monitor}' in this run over its power now"


def _factor(run: Run, monitor: Detected) -> tuple[Array, Array]:
    """Return the factor at each of the monitor's dwells, and its uncertainty from that dwell."""
    tracks = dark_tracks(run, monitor.role)
    now = _net(monitor.readings, tracks)
    everywhere = _net(Readings.of(_good_dwells(run, monitor.role)), tracks).net_w
    known = everywhere[np.isfinite(everywhere)]
    level_w = np.where(now.net_w > 0.0, now.net_w, np.nan)
    factor = (known.mean() if known.size else np.nan) / level_w
    return factor, factor * np.sqrt(now.variance_w2) / level_w


def _good_dwells(run: Run, role: str) -> list[Dwell]:
    visits = (visit for step in run.header.steps for visit in run.visits(step.name))
    return [visit.dwells[role] for visit in visits if role in visit.dwells]


def _net(readings: Readings, tracks: Mapping[float, DarkTrack]) -> Net:
    dark_w, variance_w2 = np.full((2, readings.mean_w.size), np.nan)
    for range_w, track in tracks.items():
        is_on = np.isclose(readings.range_w, range_w, rtol=1e-3, atol=0.0)
        dark_w[is_on], variance_w2[is_on] = track.at(readings.middle_s[is_on])
    return Net(dark_w, variance_w2, readings.mean_w - dark_w, readings.u_w**2 + variance_w2)


def _tracks(darks: Sequence[Dark], run: Run, role: str) -> dict[float, DarkTrack]:
    """Return a track for each range, a point for each stretch of darks between two visits."""
    begun_s = [visit.began_s for visit in run.attempts]
    points: dict[float, list[tuple[float, float, float]]] = {}

    def stretch(dark: Dark) -> tuple[int, str, str, float]:
        return (bisect_left(begun_s, dark.began_s), dark.step, dark.when, dark.dwells[role].range_w)

    for (*_, range_w), members in groupby(darks, stretch):
        point = _point(Readings.of([dark.dwells[role] for dark in members]))
        if np.isfinite(point[1]):
            points.setdefault(range_w, []).append(point)
    return {range_w: DarkTrack(*np.array(track).T) for range_w, track in points.items()}


def _point(readings: Readings) -> tuple[float, float, float]:
    """Return the instant of a stretch of darks, the mean of its readings, and the variance of that mean.

    Source
    ------
    JCGM 100:2008 (GUM), 4.2.1 and 4.2.3.
    """
    is_good = np.isfinite(readings.mean_w)
    levels_w = readings.levels_w[is_good]
    levels_w = levels_w[np.isfinite(levels_w)]
    if not levels_w.size:
        return np.nan, np.nan, np.nan
    variance_w2 = levels_w.var(ddof=1) / levels_w.size if levels_w.size > 1 else np.nan
    return float(readings.middle_s[is_good].mean()), float(levels_w.mean()), float(variance_w2)
