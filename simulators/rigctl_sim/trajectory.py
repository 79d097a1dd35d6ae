"""Where something that moves is at each instant: pieces of constant acceleration, one after the other.

It owns the history and the future of one coordinate. It knows no command and no noise. What lies behind the
present never changes; what lies ahead may be cut short by a hold.
"""

import math
from bisect import bisect_left, bisect_right
from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Piece:
    """A stretch of constant acceleration that begins at `start_s`; the next piece ends it."""

    start_s: float
    place: float
    speed: float = 0.0
    acceleration: float = 0.0

    def place_at(self, instant_s: float) -> float:
        """Place at an instant of this piece."""
        elapsed = instant_s - self.start_s
        return self.place + (self.speed + 0.5 * self.acceleration * elapsed) * elapsed

    def speed_at(self, instant_s: float) -> float:
        """Speed at an instant of this piece, per s."""
        return self.speed + self.acceleration * (instant_s - self.start_s)


class Trajectory:
    """One coordinate as a function of time; it always ends at rest.

    Parameters
    ----------
    place
        Where it rests from the beginning.
    """

    def __init__(self, place: float) -> None:
        self._pieces = [Piece(0.0, place)]
        self._starts = [-math.inf]
        self.rests_from_s = -math.inf
        self.rests_at = place

    def __call__(self, instant_s: float) -> float:
        """Place at an instant."""
        if instant_s >= self.rests_from_s:
            return self.rests_at
        return self._piece(instant_s).place_at(instant_s)

    def speed(self, instant_s: float) -> float:
        """Speed at an instant, per s."""
        if instant_s >= self.rests_from_s:
            return 0.0
        return self._piece(instant_s).speed_at(instant_s)

    def knots(self, after_s: float, before_s: float) -> list[float]:
        """Return the instants between two, both left out, at which the acceleration changes."""
        return self._starts[bisect_right(self._starts, after_s) : bisect_left(self._starts, before_s)]

    def move(self, start_s: float, target: float, *, speed: float, acceleration: float) -> float:
        """Add a move from rest to rest; return the instant at which it ends.

        Parameters
        ----------
        start_s
            Not before the end of the move before.
        speed, acceleration
            What the coordinate can do, both > 0.

        Source
        ------
        Trapezoidal speed profile, triangular where the distance is too short to reach the speed: kinematics
        of constant acceleration.
        """
        distance = target - self.rests_at
        if distance == 0.0:
            return start_s
        sense = math.copysign(1.0, distance)
        peak = min(speed, math.sqrt(acceleration * abs(distance)))
        ramp_s = peak / acceleration
        cruise_s = max(abs(distance) / peak - ramp_s, 0.0)
        ramp = 0.5 * peak * ramp_s
        self._add(Piece(start_s, self.rests_at, 0.0, sense * acceleration))
        if cruise_s > 0.0:
            self._add(Piece(start_s + ramp_s, self.rests_at + sense * ramp, sense * peak))
        falls_s = start_s + ramp_s + cruise_s
        self._add(Piece(falls_s, target - sense * ramp, sense * peak, -sense * acceleration))
        return self._rest(falls_s + ramp_s, target)

    def glide(self, start_s: float, target: float, duration_s: float) -> float:
        """Add a change at constant speed; return the instant at which it ends."""
        self.stop(start_s)
        self._add(Piece(start_s, self.rests_at, (target - self.rests_at) / duration_s))
        return self._rest(start_s + duration_s, target)

    def hold(self, now_s: float, *, acceleration: float) -> float:
        """Slow down to rest from now on; return the instant at which it rests."""
        speed = self.speed(now_s)
        self.stop(now_s)
        if speed == 0.0:
            return now_s
        slowing = -math.copysign(acceleration, speed)
        braking_s = abs(speed) / acceleration
        self._add(Piece(now_s, self.rests_at, speed, slowing))
        return self._rest(now_s + braking_s, self.rests_at + 0.5 * speed * braking_s)

    def stop(self, now_s: float) -> None:
        """Rest here and now; what was ahead is forgotten."""
        if now_s >= self.rests_from_s:
            return
        place = self(now_s)
        keep = bisect_right(self._starts, now_s)
        del self._pieces[keep:], self._starts[keep:]
        self._rest(now_s, place)

    def _piece(self, instant_s: float) -> Piece:
        return self._pieces[bisect_right(self._starts, instant_s) - 1]

    def _add(self, piece: Piece) -> None:
        self._pieces.append(piece)
        self._starts.append(piece.start_s)

    def _rest(self, instant_s: float, place: float) -> float:
        self._add(Piece(instant_s, place))
        self.rests_from_s, self.rests_at = instant_s, place
        return instant_s
