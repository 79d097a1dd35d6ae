"""Power at each detector for one moment, as plain floats, for whoever asks reading by reading.

It owns what is settled beforehand: everything in front of the first and behind the last element that moves.
"""

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cache
from typing import Protocol, TypeAlias

from rigctl.optics.forms import FORMS
from rigctl.optics.kernel import Coefficients, Stokes, through
from rigctl.optics.parts import Detector, Element
from rigctl.optics.stages import DEGREE, warming
from rigctl.optics.train import UNPOLARIZED, Train

ByName: TypeAlias = Mapping[str, float]
Turn: TypeAlias = tuple[float, float]
ALL_IN: frozenset[str] = frozenset()


class Reader(Protocol):
    """What `reader` returns."""

    def __call__(
        self,
        angles_deg: ByName,
        power_w: float,
        temperatures_c: ByName | None = None,
        absent: frozenset[str] = ALL_IN,
    ) -> tuple[float, ...]:
        """Power at each detector, W."""


class _Bound(Protocol):
    def __call__(self, angles_deg: ByName, power_w: float, temperatures_c: ByName | None) -> tuple[float, ...]: ...


@dataclass(frozen=True, slots=True)
class _Piece:
    """One element in the beam: where its axis stands while the dial reads 0, and how strong it is at rest."""

    element: Element
    form: str
    rest_deg: float
    strength: float
    coefficient: float

    @property
    def moves(self) -> bool:
        """Whether it is not always the same."""
        return self.element.mount is not None or bool(self.coefficient)

    def turn(self) -> Turn:
        """Cosine and sine of twice the azimuth while the dial reads 0."""
        twice = 2.0 * DEGREE * self.rest_deg
        return math.cos(twice), math.sin(twice)

    def coefficients(self, temperatures_c: ByName | None = None) -> Coefficients:
        """Coefficients at these temperatures; at the reference where they are silent."""
        reference_c = self.element.reference_c
        warm_c = (temperatures_c or {}).get(self.element.warmed_by or "", reference_c)
        growth, _ = warming(self.form, self.coefficient, warm_c - reference_c)
        return Coefficients(*map(float, FORMS[self.form](self.strength * growth)[0]))


_Step: TypeAlias = tuple[str | None, float, Turn, Coefficients, _Piece | None]
"""Mount, azimuth at dial 0 (deg), turn and coefficients while nothing moves, and the piece if it is warmed."""


def reader(train: Train, x: ByName) -> Reader:
    """A function of plain floats for one moment.

    Parameters
    ----------
    train, x
        As for `readings`; both are settled once. Of levels it knows nothing: `part.retardance` holds throughout.

    Returns
    -------
    A function of the dial angles (deg, by the mount's role), the source's power (W), temperatures (degC, by
    role; where silent the element's reference) and the names of elements that are out of the beam. It gives
    the power at each detector, W, in the order of the train. Light only: no stray light, no gain, no drift.
    """
    values = train.values(x)
    bound = cache(lambda absent: _bound(train, values, absent))
    all_in: _Bound = bound(ALL_IN)

    def read(
        angles_deg: ByName, power_w: float, temperatures_c: ByName | None = None, absent: frozenset[str] = ALL_IN
    ) -> tuple[float, ...]:
        return (bound(absent) if absent else all_in)(angles_deg, power_w, temperatures_c)

    return read


def _bound(train: Train, values: ByName, absent: frozenset[str]) -> _Bound:
    """The function for one set of elements in the beam."""
    pieces = [_piece(train, element, values) for element in train.elements if element.name not in absent]
    first = next((k for k, piece in enumerate(pieces) if piece.moves), len(pieces))
    lead = _light(train.source, pieces[:first])
    taps = [_tap(train, detector, pieces, values) for detector in train.detectors]
    steps = [_step(piece) for piece in pieces[first : max([place for place, _ in taps], default=0)]]
    seen = [(max(0, 1 + place - first), row) for place, row in taps]

    def read(angles_deg: ByName, power_w: float, temperatures_c: ByName | None) -> tuple[float, ...]:
        planes = [UNPOLARIZED, lead]
        for mount, rest_deg, turn, coefficients, warm in steps:
            if mount is not None:
                twice = (2.0 * DEGREE) * (rest_deg + angles_deg[mount])
                turn = (math.cos(twice), math.sin(twice))
            if warm is not None:
                coefficients = warm.coefficients(temperatures_c)
            planes.append(through(planes[-1], turn, coefficients))
        return tuple([power_w * _dot(row, planes[plane]) for plane, row in seen])

    return read


def _tap(train: Train, detector: Detector, pieces: Sequence[_Piece], values: ByName) -> tuple[int, Stokes[float]]:
    """How many elements the light meets up to the last one that moves in front of a detector, and the row there.

    Where none moves the power never changes: it is then the row for light of unit power.
    """
    names = [piece.element.name for piece in pieces]
    end, share = len(pieces), 1.0
    if detector.after is not None:
        is_in = detector.after in names
        end = names.index(detector.after) if is_in else 0
        share = values[train.element(detector.after).strength] if is_in else 0.0
    place = max([k + 1 for k, piece in enumerate(pieces[:end]) if piece.moves], default=0)
    if not place:
        return 0, (share * _light(train.source, pieces[:end])[0], 0.0, 0.0, 0.0)
    row = (share, 0.0, 0.0, 0.0)
    for piece in reversed(pieces[place:end]):
        row = through(row, piece.turn(), piece.coefficients().reversed())
    return place, row


def _light(source: Stokes[float], pieces: Sequence[_Piece]) -> Stokes[float]:
    light = source
    for piece in pieces:
        light = through(light, piece.turn(), piece.coefficients())
    return light


def _dot(row: Stokes[float], light: Stokes[float]) -> float:
    return row[0] * light[0] + row[1] * light[1] + row[2] * light[2] + row[3] * light[3]


def _piece(train: Train, element: Element, values: ByName) -> _Piece:
    rest_deg = values.get(element.axis or "", 0.0) - values.get(element.dial_offset or "", 0.0)
    coefficient = values.get(element.temperature_coefficient or "", 0.0)
    kind = train.quantities[element.strength].kind
    return _Piece(element, kind, rest_deg, values[element.strength], coefficient)


def _step(piece: _Piece) -> _Step:
    warm = piece if piece.coefficient else None
    return piece.element.mount, piece.rest_deg, piece.turn(), piece.coefficients(), warm
