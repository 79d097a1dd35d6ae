"""What a detector with a first-order lag shows of light that changes: closed forms, piece by piece.

Pure arithmetic; it owns no state and knows no instrument.
"""

import math

FORGOTTEN = 18.0
"""After so many time constants a change has left exp(-18) = 1.5e-8 of itself; an instrument shows 1e-7."""
_SHORT = 1e-3
"""Parts of a time constant; Simpson's rule misses the fifth power of this, over 2880."""


def respond(
    shown: float, light: tuple[float, float, float], *, duration_s: float, time_constant_s: float
) -> tuple[float, float]:
    """Follow light through one piece.

    Parameters
    ----------
    shown
        What the detector shows at the beginning, W.
    light
        The light at the beginning, middle and end of the piece, W; a parabola is drawn through them.
    duration_s
        Length of the piece, > 0.

    Returns
    -------
    What the detector shows at the end, W, and the integral of what it showed, J.

    Source
    ------
    tau y' + y = P(u) solved for P = a + b u + c u^2: y = a + b (u - tau) + c (u^2 - 2 tau u + 2 tau^2) plus a
    decaying exponential; the integral of y is that of P (Simpson's rule, exact for a parabola) less
    tau (y(end) - y(begin)), which is the equation itself, integrated. In a piece much shorter than tau the
    closed form is a difference of large numbers; Simpson's rule over P exp(-(h - u)/tau)/tau stands in there.
    """
    begin, middle, end = light
    energy = duration_s * (begin + 4.0 * middle + end) / 6.0
    if duration_s < _SHORT * time_constant_s:
        kept = math.exp(-0.5 * duration_s / time_constant_s)
        taken = (begin * kept * kept + 4.0 * middle * kept + end) / 6.0
        after = shown * kept * kept + taken * duration_s / time_constant_s
        return after, energy - time_constant_s * (after - shown)
    slope = (4.0 * middle - 3.0 * begin - end) / duration_s
    curve = 2.0 * (begin - 2.0 * middle + end) / (duration_s * duration_s)
    lagging = 2.0 * curve * time_constant_s * time_constant_s - slope * time_constant_s
    decayed = math.exp(-duration_s / time_constant_s) if time_constant_s > 0.0 else 0.0
    lagging_end = lagging - 2.0 * curve * time_constant_s * duration_s
    after = end + lagging_end + (shown - begin - lagging) * decayed
    return after, energy - time_constant_s * (after - shown)
