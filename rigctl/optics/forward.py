"""Power at each detector for every visit, with all its slopes.

It owns the way through the whole train, forward with the light and back with each detector's row; it never
fits and never draws noise.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from rigctl.optics.kernel import Array, Stokes, coefficient_slopes, through, torque
from rigctl.optics.parts import DRIFT, POWER, Detector, Element, at_level
from rigctl.optics.stages import DEGREE, Stage, planes_of, stages_of, value_at
from rigctl.optics.train import Train
from rigctl.optics.visits import Visits


@dataclass(frozen=True, slots=True)
class _Passage:
    """A train and its visits at certain values: the elements, and the light from plane to plane."""

    train: Train
    visits: Visits
    values: Mapping[str, float]
    stages: Sequence[Stage]
    planes: Sequence[Stokes[Array]]

    def at(self, address: str) -> float:
        """The value behind an address, a number or a column."""
        return value_at(self.train, self.visits, self.values, address)

    def place(self, detector: Detector) -> int:
        """Number of the plane at which a detector takes its light."""
        if detector.after is None:
            return len(self.stages)
        return self.train.elements.index(self.train.element(detector.after))

    def share(self, detector: Detector) -> float | Array:
        """Part of the light at its plane that a detector gets: a pick-off's fraction while that is in the beam."""
        if detector.after is None:
            return 1.0
        stage = self.stages[self.place(detector)]
        return stage.seen(self.at(stage.element.strength) * np.ones(self.visits.count))

    def gain(self, detector: Detector) -> float:
        """Reading of a detector per power, a number or a column."""
        return self.at(detector.gain) if detector.gain in self.train.quantities else 1.0

    def transmission(self, detector: Detector) -> Array:
        """Power that reaches a detector from a steady source of unit power."""
        transmitted: Array = self.planes[self.place(detector)][0] * self.share(detector)
        return transmitted

    def openness(self) -> Array:
        """Relative power of the source without its drift, 0 when blocked."""
        openness = np.asarray(self.visits.is_open, dtype=float)
        return openness if self.visits.power is None else openness * self.visits.power

    def rows(self, detector: Detector) -> list[Stokes[Array]]:
        """A detector's row at each plane from the source's to its own."""
        zero = np.zeros(self.visits.count)
        rows: list[Stokes[Array]] = [(zero + self.share(detector), zero, zero, zero)]
        for stage in reversed(self.stages[: self.place(detector)]):
            rows.append(through(rows[-1], stage.turn, stage.coefficients.reversed()))
        return rows[::-1]


def _passage(train: Train, visits: Visits, x: Mapping[str, float]) -> _Passage:
    values = train.values(x)
    stages = stages_of(train, visits, values)
    return _Passage(train, visits, values, stages, planes_of(train, visits, stages))


def unit_light(train: Train, visits: Visits, x: Mapping[str, float]) -> Mapping[str, Array]:
    """What each detector reads of a source of unit power without drift, stray light left out; shape (n,).

    The values of `x` may be columns of shape (G, 1): the result is then of shape (G, n).
    """
    passage = _passage(train, visits, x)
    openness = passage.openness()
    return {d.name: openness * passage.gain(d) * passage.transmission(d) for d in train.detectors}


def readings(train: Train, visits: Visits, x: Mapping[str, float]) -> Mapping[str, Array]:
    """Power that each detector reads.

    Parameters
    ----------
    train
        The train; its nominal values hold where `x` is silent.
    visits
        Settings of n visits.
    x
        Values by address, in the units of their kinds; `part.retardance @ 22 degC` is that of one level,
        `part.retardance` that of all levels which are not given.

    Returns
    -------
    By the detector's name: shape (n,), W, stray light included.
    """
    passage = _passage(train, visits, x)
    return {d.name: _level(passage, d, _beam(passage, d)) for d in train.detectors}


def _beam(passage: _Passage, detector: Detector) -> Array:
    """Power of the source that counts for a detector, gain and drift included."""
    course = 1.0 + passage.at(DRIFT) * passage.visits.centred_h
    beam: Array = passage.openness() * (passage.at(POWER) * passage.gain(detector)) * course
    return beam


def _level(passage: _Passage, detector: Detector, beam: Array) -> Array:
    level: Array = beam * passage.transmission(detector) + passage.at(detector.stray_light)
    return level


def readings_and_slopes(
    train: Train, visits: Visits, x: Mapping[str, float], names: Sequence[str]
) -> tuple[Mapping[str, Array], Mapping[str, Array]]:
    """Power that each detector reads, and its slopes with the named quantities.

    Parameters
    ----------
    train, visits, x
        As for `readings`.
    names
        Addresses of the P quantities to differentiate by, those of single levels among them.

    Returns
    -------
    By the detector's name: readings, shape (n,), W; slopes, shape (n, P), W per unit of the quantity's kind.

    Source
    ------
    One pass forward with the light and one back with each detector's row; every slope is then a local
    product (see `kernel`). Checked by complex step.
    """
    passage = _passage(train, visits, x)
    masks = level_masks(train, visits)
    levels, slopes, zeros = {}, {}, np.zeros(visits.count)
    for detector in train.detectors:
        beam = _beam(passage, detector)
        levels[detector.name] = _level(passage, detector, beam)
        columns = _columns(passage, detector, beam, {masks[n][0] if n in masks else n for n in names})
        columns |= {n: columns[base] * mask for n, (base, mask) in masks.items() if base in columns}
        slopes[detector.name] = np.stack([columns.get(n, zeros) for n in names], axis=-1)
    return levels, slopes


def level_masks(train: Train, visits: Visits) -> dict[str, tuple[str, Array]]:
    """By the address at a level: the address without it, and 1 where a visit belongs to the level."""
    apart = [(q.name, visits.levels_for(q.each, q.name)) for q in train.quantities.values() if q.each is not None]
    return {
        at_level(name, label): (name, 1.0 * (levels.index == k))
        for name, levels in apart
        for k, label in enumerate(levels.labels)
    }


def _columns(passage: _Passage, detector: Detector, beam: Array, names: set[str]) -> dict[str, Array]:
    """Slopes of one detector's readings by address."""
    visits, transmitted = passage.visits, passage.transmission(detector)
    steady = passage.openness() * passage.gain(detector) * transmitted
    columns = {address: beam * slope for address, slope in _element_slopes(passage, detector, names).items()}
    columns[POWER] = steady * (1.0 + passage.at(DRIFT) * visits.centred_h)
    columns[DRIFT] = steady * passage.at(POWER) * visits.centred_h
    columns[detector.stray_light] = np.ones(visits.count)
    if detector.gain in names:
        columns[detector.gain] = columns[POWER] * passage.at(POWER) / passage.gain(detector)
    return columns


def _element_slopes(passage: _Passage, detector: Detector, names: set[str]) -> dict[str, Array]:
    """Slopes of the transmission with the quantities of the elements."""
    planes, rows, slopes = passage.planes, passage.rows(detector), dict[str, Array]()
    for k, stage in enumerate(passage.stages[: passage.place(detector)]):
        wanted = names.intersection(stage.slopes)
        local = coefficient_slopes(planes[k], rows[k + 1], stage.turn) if wanted else ()
        for address in wanted:
            products = [slope * part for slope, part in zip(stage.slopes[address], local, strict=True)]
            slopes[address] = sum(products, np.zeros(passage.visits.count))
        axis, dial_offset = stage.element.axis, stage.element.dial_offset
        if axis is not None and names.intersection((axis, dial_offset)):
            turning = DEGREE * (torque(planes[k + 1], rows[k + 1]) - torque(planes[k], rows[k]))
            slopes[axis] = turning
            if dial_offset is not None:
                slopes[dial_offset] = -turning
    if detector.after is not None:
        stage = passage.stages[passage.place(detector)]
        slopes[stage.element.strength] = stage.seen(planes[passage.place(detector)][0])
    return slopes


def coefficient_visibility(
    train: Train, visits: Visits, x: Mapping[str, float], element: Element
) -> tuple[Array, Array]:
    """Slopes of what the detectors get with the cosine and sine coefficients of one element, one after another.

    Where one is zero at every visit the sweep cannot see that coefficient, and a fit is free to choose
    the form of the element's strength that stays linear.
    """
    passage, k = _passage(train, visits, x), train.elements.index(element)
    stage, cosines, sines = passage.stages[k], [], []
    for detector in train.detectors:
        if k < passage.place(detector):
            _, _, cosine, sine = coefficient_slopes(passage.planes[k], passage.rows(detector)[k + 1], stage.turn)
            cosines.append(stage.seen(cosine * visits.is_open))
            sines.append(stage.seen(sine * visits.is_open))
    return np.concatenate([*cosines, np.zeros(0)]), np.concatenate([*sines, np.zeros(0)])
