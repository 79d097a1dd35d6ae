"""Power at each detector for every visit, with all its slopes, and the same for one moment as plain floats.

It owns the way through the whole train, forward with the light and back with the detector's row; it
never fits and never draws noise.
"""

import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from rigctl.errors import PlanError
from rigctl.optics.forms import FORMS
from rigctl.optics.kernel import Array, Coefficients, Stokes, coefficient_slopes, through, torque
from rigctl.optics.train import DRIFT, POWER, Element, Train
from rigctl.optics.visits import Visits

DEGREE = math.pi / 180.0


@dataclass(frozen=True, slots=True)
class _Stage:
    """An element as the visits meet it."""

    element: Element
    turn: tuple[Array, Array]
    coefficients: Coefficients
    slopes: Coefficients


def _stage(train: Train, element: Element, visits: Visits, values: Mapping[str, float]) -> _Stage:
    azimuth_deg = values[element.axis] + _mount_deg(element, visits) - values.get(element.dial_offset or "", 0.0)
    twice = (2.0 * DEGREE) * azimuth_deg
    form = FORMS[train.quantities[element.strength].kind]
    return _Stage(element, (np.cos(twice), np.sin(twice)), *form(values[element.strength]))


def _rest_deg(element: Element, values: Mapping[str, float]) -> float:
    """Azimuth while the mount's dial reads 0 deg."""
    return values[element.axis] - (values[element.dial_offset] if element.dial_offset else 0.0)


def _mount_deg(element: Element, visits: Visits) -> Array:
    if element.mount is None:
        return np.zeros(visits.count)
    if element.mount not in visits.angle_deg:
        raise PlanError(f"the visits do not say where '{element.mount}' stood", where=element.name)
    return visits.angle_deg[element.mount]


def _planes(source: Stokes[Array], stages: Sequence[_Stage]) -> list[Stokes[Array]]:
    planes = [source]
    for stage in stages:
        planes.append(through(planes[-1], stage.turn, stage.coefficients))
    return planes


def _rows(count: int, stages: Sequence[_Stage]) -> list[Stokes[Array]]:
    """The detector's row at each plane, from the source's plane on."""
    zero = np.zeros(count)
    rows = [(np.ones(count), zero, zero, zero)]
    for stage in reversed(stages):
        rows.append(through(rows[-1], stage.turn, stage.coefficients.reversed()))
    return rows[::-1]


def _source(train: Train, visits: Visits) -> Stokes[Array]:
    S0, S1, S2, S3 = (np.full(visits.count, component) for component in train.source)
    return S0, S1, S2, S3


def transmission(train: Train, visits: Visits, x: Mapping[str, float]) -> Array:
    """Power at the end of the train for a steady, open source of unit power, shape (n,).

    The values of `x` may be columns of shape (G, 1): the result is then of shape (G, n).
    """
    values = train.values(x)
    stages = [_stage(train, element, visits, values) for element in train.elements]
    return _planes(_source(train, visits), stages)[-1][0]


def readings(train: Train, visits: Visits, x: Mapping[str, float]) -> Mapping[str, Array]:
    """Power that each detector reads.

    Parameters
    ----------
    train
        The train; its nominal values hold where `x` is silent.
    visits
        Settings of n visits.
    x
        Values by address, in the units of their kinds.

    Returns
    -------
    By the detector's name: shape (n,), W, stray light included.
    """
    values = train.values(x)
    beam = values[POWER] * _course(visits, values) * transmission(train, visits, x)
    return {detector.name: beam + values[detector.stray_light] for detector in train.detectors}


def _course(visits: Visits, values: Mapping[str, float]) -> Array:
    """The source's course: 0 when blocked, else 1 in the middle of the time, with its drift."""
    return visits.is_open * (1.0 + values[DRIFT] * visits.centred_h)


def readings_and_slopes(
    train: Train, visits: Visits, x: Mapping[str, float], names: Sequence[str]
) -> tuple[Mapping[str, Array], Mapping[str, Array]]:
    """Power that each detector reads, and its slopes with the named quantities.

    Parameters
    ----------
    train, visits, x
        As for `readings`.
    names
        Addresses of the P quantities to differentiate by.

    Returns
    -------
    By the detector's name: readings, shape (n,), W; slopes, shape (n, P), W per unit of the quantity's kind.

    Source
    ------
    One pass forward with the light and one back with the detector's row; every slope is then a local
    product (see `kernel`). Checked by complex step.
    """
    values = train.values(x)
    stages = [_stage(train, element, visits, values) for element in train.elements]
    planes, rows = _planes(_source(train, visits), stages), _rows(visits.count, stages)
    course, fraction = _course(visits, values), planes[-1][0]
    columns = {
        POWER: course * fraction,
        DRIFT: values[POWER] * visits.is_open * visits.centred_h * fraction,
    }
    beam_w = values[POWER] * course
    for address, slope in _element_slopes(stages, planes, rows, set(names)).items():
        columns[address] = beam_w * slope
    beam = beam_w * fraction
    levels = {d.name: beam + values[d.stray_light] for d in train.detectors}
    ones, zeros = np.ones(visits.count), np.zeros(visits.count)
    slopes = {
        d.name: np.stack([columns.get(n, ones if n == d.stray_light else zeros) for n in names], axis=-1)
        for d in train.detectors
    }
    return levels, slopes


def _element_slopes(
    stages: Sequence[_Stage], planes: Sequence[Stokes[Array]], rows: Sequence[Stokes[Array]], names: set[str]
) -> dict[str, Array]:
    slopes: dict[str, Array] = {}
    for k, stage in enumerate(stages):
        element = stage.element
        if element.strength in names:
            local = coefficient_slopes(planes[k], rows[k + 1], stage.turn)
            slopes[element.strength] = sum((s * d for s, d in zip(stage.slopes, local, strict=True)), np.zeros(()))
        if names.intersection((element.axis, element.dial_offset)):
            turning = DEGREE * (torque(planes[k + 1], rows[k + 1]) - torque(planes[k], rows[k]))
            slopes[element.axis] = turning
            if element.dial_offset:
                slopes[element.dial_offset] = -turning
    return slopes


def coefficient_visibility(
    train: Train, visits: Visits, x: Mapping[str, float], element: Element
) -> tuple[Array, Array]:
    """Slopes of the transmission with the cosine and sine coefficients of one element.

    Where one is zero at every visit the sweep cannot see that coefficient, and a fit is free to choose
    the form of the element's strength that stays linear.
    """
    values = train.values(x)
    stages = [_stage(train, e, visits, values) for e in train.elements]
    planes, rows = _planes(_source(train, visits), stages), _rows(visits.count, stages)
    k = train.elements.index(element)
    _, _, cosine, sine = coefficient_slopes(planes[k], rows[k + 1], stages[k].turn)
    return cosine * visits.is_open, sine * visits.is_open


def reader(train: Train, x: Mapping[str, float]) -> Callable[[Mapping[str, float], float], tuple[float, ...]]:
    """A function of plain floats for one moment, for whoever asks reading by reading.

    Parameters
    ----------
    train, x
        As for `readings`; both are settled once.

    Returns
    -------
    A function of the dial angles (deg, by the mount's role) and the source's power (W) that gives the
    power at each detector, W, in the order of the train. Light only: no stray light, no drift.
    """
    values = train.values(x)
    stages = [_scalar_stage(train, element, values) for element in train.elements]
    source, count = train.source, len(train.detectors)

    def read(angles_deg: Mapping[str, float], power_w: float) -> tuple[float, ...]:
        light = source
        for mount, base_deg, coefficients in stages:
            twice = (2.0 * DEGREE) * (base_deg + (angles_deg[mount] if mount else 0.0))
            light = through(light, (math.cos(twice), math.sin(twice)), coefficients)
        return (power_w * light[0],) * count

    return read


def _scalar_stage(
    train: Train, element: Element, values: Mapping[str, float]
) -> tuple[str | None, float, Coefficients]:
    coefficients, _ = FORMS[train.quantities[element.strength].kind](values[element.strength])
    return element.mount, float(_rest_deg(element, values)), Coefficients(*map(float, coefficients))
