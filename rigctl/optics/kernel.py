"""Light through one element, and the light's row back through it: the only formula of the train.

It owns the arithmetic on four Stokes components; it never knows names, units or instruments. The same
lines carry floats (the simulated bench), arrays (prediction and fit) and complex steps (tests).
"""

from typing import Any, NamedTuple, TypeAlias, TypeVar, cast

import numpy as np
import numpy.typing as npt

Array: TypeAlias = npt.NDArray[np.float64]
Flags: TypeAlias = npt.NDArray[np.bool_]
Indices: TypeAlias = npt.NDArray[np.intp]
Number = TypeVar("Number", float, Array)
Stokes: TypeAlias = tuple[Number, Number, Number, Number]


class Coefficients(NamedTuple):
    """A linear diattenuating retarder in its own frame, or the slope of one.

    With principal transmittances k1, k2 and retardance d: mean (k1 + k2)/2, contrast (k1 - k2)/2,
    cosine sqrt(k1 k2) cos d, sine sqrt(k1 k2) sin d.
    """

    mean: float
    contrast: float
    cosine: float
    sine: float

    def reversed(self) -> "Coefficients":
        """The same element met from behind: its Mueller matrix transposed."""
        return self._replace(sine=-self.sine)


def as_number(column: npt.NDArray[Any]) -> float:
    """A column where a number is expected: it broadcasts through the same arithmetic."""
    return cast("float", column)


def through(light: Stokes[Number], turn: tuple[Number, Number], element: Coefficients) -> Stokes[Number]:
    """Light behind an element.

    Parameters
    ----------
    light
        Stokes components in front of it.
    turn
        Cosine and sine of twice the element's azimuth.
    element
        Its coefficients.

    Returns
    -------
    Stokes components behind it, of the shape of `light` and `turn` broadcast.

    Source
    ------
    Mueller matrix of a linear diattenuating retarder, M[2,3] = +sin d at azimuth 0: the convention
    of the packages py_pol and pypolar, with which the tests compare it.
    """
    c, s = turn
    a, b, gc, gs = element
    S0, S1, S2, S3 = light
    u, v = c * S1 + s * S2, c * S2 - s * S1
    x, w = b * S0 + a * u, gc * v + gs * S3
    return a * S0 + b * u, c * x - s * w, s * x + c * w, gc * S3 - gs * v


def coefficient_slopes(light: Stokes[Array], row: Stokes[Array], turn: tuple[Array, Array]) -> tuple[Array, ...]:
    """Slopes of the detected power with an element's four coefficients.

    Parameters
    ----------
    light
        Stokes components in front of the element, shape (n,) each.
    row
        The detector's row behind the element, carried back through the rest of the train.
    turn
        Cosine and sine of twice the azimuth.

    Returns
    -------
    Slopes with mean, contrast, cosine and sine; shape (n,) each.

    Source
    ------
    Derivative of row . through(light) by each coefficient; checked by complex step.
    """
    c, s = turn
    S0, S1, S2, S3 = light
    L0, L1, L2, L3 = row
    u, v = c * S1 + s * S2, c * S2 - s * S1
    p, q = c * L1 + s * L2, c * L2 - s * L1
    return L0 * S0 + p * u, L0 * u + p * S0, q * v + L3 * S3, q * S3 - L3 * v


def torque(light: Stokes[Array], row: Stokes[Array]) -> Array:
    """Slope of the detected power with a common turn, in radians, of all that lies behind a plane.

    The slope with one element's azimuth is the torque behind it less the torque in front of it.

    Source
    ------
    An element turned by h is R(h) M R(-h); the derivative of the rotation R at h = 0 mixes S1 and S2.
    """
    return 2.0 * (row[2] * light[1] - row[1] * light[2])
