"""The way to an angle: from one side only, so that backlash drops out.

Pure arithmetic on angles; who turns the mount is elsewhere.
"""

from dataclasses import dataclass
from typing import Literal

Approach = Literal["from below", "from above", "either"]


@dataclass(frozen=True, slots=True)
class Standing:
    """Where a mount stands after a completed move, deg, and the approach by which it came there."""

    angle_deg: float
    approach: Approach


def waypoints(
    last_deg: float | None, target_deg: float, approach: Approach, *, backlash_deg: float
) -> tuple[float, ...]:
    """Return the angles to move to, in order, so that the last move comes from the wanted side.

    A one-sided approach goes past the target by twice the backlash and comes back, unless the mount stands on
    the right side already and came there from that side. Where the last angle is unknown (the first visit,
    after homing) it always does.

    Parameters
    ----------
    last_deg
        Angle of the last completed move of the same approach, deg; None when there is none.
    """
    if approach == "either" or backlash_deg == 0.0:
        return (target_deg,)
    sense = 1.0 if approach == "from below" else -1.0
    if last_deg is not None and sense * (target_deg - last_deg) > 0.0:
        return (target_deg,)
    return (target_deg - sense * 2.0 * backlash_deg, target_deg)


def way_to(
    target_deg: float, approach: Approach, *, standing: Standing | None, backlash_deg: float
) -> tuple[float, ...]:
    """Return the angles to move to, in order; none where the mount stands there and came by the same approach.

    Parameters
    ----------
    standing
        None where the mount's last move is unknown or did not end.
    """
    last_deg = standing.angle_deg if standing is not None and standing.approach == approach else None
    if last_deg == target_deg:
        return ()
    return waypoints(last_deg, target_deg, approach, backlash_deg=backlash_deg)
