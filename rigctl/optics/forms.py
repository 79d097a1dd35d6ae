"""The number that says what an element does, and the coefficients that follow from it.

It owns one formula per form of that number, each with its slope. `ratio` and `retardance` are what
people write; `leak` and `cosine` are the same strengths written so that a fit stays linear at the edges.
Each formula takes a number, or a column of them where it differs from visit to visit.
"""

from collections.abc import Callable, Mapping
from types import MappingProxyType
from typing import TypeAlias

import numpy as np

from rigctl.optics.kernel import Coefficients, as_number

Formed: TypeAlias = tuple[Coefficients, Coefficients]
TURN = 2.0 * np.pi


def from_ratio(ratio: float) -> Formed:
    """Polarizer from its extinction ratio k2/k1, with k1 = 1; a negative one leaks no amplitude.

    Returns
    -------
    Coefficients, and their slopes with the ratio.

    Source
    ------
    Definition of the coefficients in `kernel.Coefficients`.
    """
    is_positive = np.real(ratio) > 0
    root = as_number(np.where(is_positive, ratio, 0.0) ** 0.5)
    slope = as_number(np.divide(0.5, root, out=np.zeros_like(root), where=is_positive))
    return (
        Coefficients((1.0 + ratio) / 2, (1.0 - ratio) / 2, root, 0.0),
        Coefficients(0.5, -0.5, slope, 0.0),
    )


def from_leak(leak: float) -> Formed:
    """Polarizer from the signed amplitude it leaks, the root of its extinction ratio.

    Returns
    -------
    Coefficients, and their slopes with the leak.

    Source
    ------
    Definition of the coefficients in `kernel.Coefficients`, with k2 = leak^2.
    """
    ratio = leak * leak
    return Coefficients((1.0 + ratio) / 2, (1.0 - ratio) / 2, leak, 0.0), Coefficients(leak, -leak, 1.0, 0.0)


def from_retardance(waves: float) -> Formed:
    """Retarder from its retardance in waves; it loses nothing.

    Returns
    -------
    Coefficients, and their slopes per wave.

    Source
    ------
    Definition of the coefficients in `kernel.Coefficients`, with k1 = k2 = 1.
    """
    cosine, sine = np.cos(TURN * waves), np.sin(TURN * waves)
    return Coefficients(1.0, 0.0, cosine, sine), Coefficients(0.0, 0.0, -TURN * sine, TURN * cosine)


def from_cosine(cosine: float) -> Formed:
    """Retarder from the cosine of its retardance, which a fit may carry beyond -1 and 1.

    Only for a sweep that cannot see the sine, which is left out.

    Returns
    -------
    Coefficients, and their slopes with the cosine.

    Source
    ------
    Definition of the coefficients in `kernel.Coefficients`, with k1 = k2 = 1.
    """
    return Coefficients(1.0, 0.0, cosine, 0.0), Coefficients(0.0, 0.0, 1.0, 0.0)


def from_fraction(fraction: float) -> Formed:
    """Beam that a pick-off leaves when it takes a fraction of the light; it does not polarize.

    Returns
    -------
    Coefficients, and their slopes with the fraction.

    Source
    ------
    Definition of the coefficients in `kernel.Coefficients`, with k1 = k2 = 1 - fraction.
    """
    return Coefficients(1.0 - fraction, 0.0, 1.0 - fraction, 0.0), Coefficients(-1.0, 0.0, -1.0, 0.0)


FORMS: Mapping[str, Callable[[float], Formed]] = MappingProxyType(
    {
        "ratio": from_ratio,
        "leak": from_leak,
        "retardance": from_retardance,
        "cosine": from_cosine,
        "fraction": from_fraction,
    }
)
