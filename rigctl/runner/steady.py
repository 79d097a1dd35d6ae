"""Waits until a temperature is steady: by band, slope and time.

It owns the criterion; the setpoint was given before.
"""

from collections.abc import Callable
from dataclasses import dataclass, field

from rigctl.errors import InstrumentError
from rigctl.files.recipe import Steady
from rigctl.interfaces import ControllerConditions
from rigctl.runner.limits import LimitedController
from rigctl.timeline import Timeline

LOOK_EVERY_S = 1.0
"""A thermal plant of a diode moves over seconds; a look costs one exchange."""

STEADY = Steady(within_k=0.05, for_s=60.0, give_up_s=1800.0)
"""Where a recipe says nothing: a twentieth of a kelvin for a minute, half an hour at most."""

Listener = Callable[[str, ControllerConditions], None]


@dataclass(slots=True)
class Settling:
    """The looks at a temperature that all lay in the band, newest last: instant s, temperature degC."""

    wanted_c: float
    steady: Steady
    looks: list[tuple[float, float]] = field(default_factory=list)

    def look(self, now_s: float, temperature_c: float) -> bool:
        """Take a look in; True once the temperature has been steady for as long as asked."""
        if abs(temperature_c - self.wanted_c) > self.steady.within_k:
            self.looks.clear()
            return False
        self.looks.append((now_s, temperature_c))
        # only the newest stretch counts: older looks may show a slope that has died out since
        while len(self.looks) > 2 and now_s - self.looks[1][0] >= self.steady.for_s:
            self.looks.pop(0)
        is_long = now_s - self.looks[0][0] >= self.steady.for_s
        return is_long and (self.steady.slope_k_per_s is None or abs(self.slope_k_per_s()) <= self.steady.slope_k_per_s)

    def slope_k_per_s(self) -> float:
        """Slope of the straight line through the looks, K/s (ordinary least squares)."""
        count = len(self.looks)
        if count < 2:
            return 0.0
        mean_s = sum(instant for instant, _ in self.looks) / count
        mean_c = sum(value for _, value in self.looks) / count
        over = sum((instant - mean_s) * (value - mean_c) for instant, value in self.looks)
        return over / sum((instant - mean_s) ** 2 for instant, _ in self.looks)


def wait_until_steady(
    controller: LimitedController, steady: Steady, timeline: Timeline, *, tell: Listener | None = None
) -> None:
    """Look at a temperature until it is steady at its setpoint.

    Parameters
    ----------
    tell
        Hears every look, for the run file.

    Errors
    ------
    `InstrumentError` when it is not steady by `give_up_s`, or its sensor fails; `StopRequestedError`.
    """
    assert controller.set_c is not None
    settling = Settling(controller.set_c, steady)
    began_s = timeline.now()
    while True:
        seen = controller.conditions()
        now_s = timeline.now()
        if tell is not None:
            tell(controller.role, seen)
        if settling.look(now_s, seen.temperature_c):
            return
        if now_s - began_s > steady.give_up_s:
            raise InstrumentError(
                f"is not steady within {steady.within_k:.3g} K of {settling.wanted_c:.4g} degC after "
                f"{steady.give_up_s / 60.0:.0f} min; it reads {seen.temperature_c:.3f} degC",
                where=controller.role,
                do="Look at its load and its controller, or give it more time in the recipe.",
            )
        timeline.wait_until(now_s + LOOK_EVERY_S)
