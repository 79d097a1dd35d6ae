"""Brings temperatures and currents where a recipe wants them, the diode's current always last.

It owns the order that protects a diode: its temperature moves at zero current, its current by a ramp.
"""

from collections.abc import Callable

from rigctl.errors import InstrumentError
from rigctl.files.recipe import Preparation, Steady
from rigctl.interfaces import ControllerConditions, SourceConditions
from rigctl.runner.bench import OpenBench
from rigctl.runner.driving import ramp
from rigctl.runner.steady import STEADY, wait_until_steady
from rigctl.timeline import Timeline


class Climate:
    """Sets temperatures and currents on an open bench.

    Parameters
    ----------
    tell
        Hears every look at a temperature on its way: role, values by name with their unit.
    """

    def __init__(self, bench: OpenBench, timeline: Timeline, tell: Callable[[str, dict[str, float]], None]) -> None:
        self.bench, self.timeline, self._tell = bench, timeline, tell
        self._wanted_a: dict[str, tuple[float, float | None]] = {}
        """Which current each source was last asked for, A, and by what ramp, A/s."""

    def prepare(self, wanted: Preparation) -> None:
        """Do one line of `prepare:`."""
        if wanted.role in self.bench.controllers:
            self.set_temperature(wanted.role, wanted.to, wanted.steady)
            self.bring_back()
            return
        self.set_current(wanted.role, wanted.to, wanted.ramp_a_per_s)
        self.timeline.wait_until(self.timeline.now() + wanted.warm_up_s)

    def set_temperature(self, role: str, to_c: float, steady: Steady | None) -> None:
        """Move a temperature and wait until it is steady; a diode's own moves at zero current."""
        controller = self.bench.controllers[role]
        if controller.set_c == to_c:
            return
        self._rest_diode(role)
        controller.set_temperature(to_c)
        wait_until_steady(controller, steady or STEADY, self.timeline, tell=self._heard)

    def set_current(self, role: str, to_a: float, rate_a_per_s: float | None) -> None:
        """Ramp a current; the output goes on first, at zero, where it is off."""
        source = self.bench.sources[role]
        if not source.is_on:
            source.refuse_beyond(to_a)
            _refuse_ill(role, source.conditions())
            source.switch_on()
        ramp(source, to_a, self.timeline, rate_a_per_s=rate_a_per_s)
        if to_a > 0.0:
            _refuse_ill(role, source.conditions(), must_be_on=True)
        self._wanted_a[role] = (to_a, rate_a_per_s)

    def bring_back(self) -> None:
        """Ramp every current back to where it was asked to be, after a temperature moved without it."""
        for role, (to_a, rate_a_per_s) in self._wanted_a.items():
            if self.bench.sources[role].set_a != to_a:
                self.set_current(role, to_a, rate_a_per_s)

    def rest(self) -> None:
        """Ramp every source down and switch it off, as for a background."""
        for source in self.bench.sources.values():
            ramp(source, 0.0, self.timeline)
            source.switch_off()

    def conditions(self) -> dict[str, dict[str, float]]:
        """Read what every source and controller says, by role; a diode in trouble ends the run.

        Errors
        ------
        `InstrumentError` for an open interlock, a trip, compliance, or a sensor that fails.
        """
        seen: dict[str, dict[str, float]] = {}
        for role, source in self.bench.sources.items():
            read = source.conditions()
            seen[role] = {"current_a": read.current_a, "voltage_v": read.voltage_v}
            if source.set_a > 0.0:
                _refuse_ill(role, read, must_be_on=True)
        for role, controller in self.bench.controllers.items():
            seen[role] = _values(controller.conditions())
        return seen

    def _rest_diode(self, controller_role: str) -> None:
        driver = self.bench.recipe.source.driven_by
        if controller_role == self.bench.recipe.source.cooled_by and driver in self.bench.sources:
            ramp(self.bench.sources[driver], 0.0, self.timeline)

    def _heard(self, role: str, read: ControllerConditions) -> None:
        self._tell(role, _values(read))


def _refuse_ill(role: str, read: SourceConditions, *, must_be_on: bool = False) -> None:
    troubles = {
        "its interlock is open": read.is_interlock_open,
        "its protection has tripped": read.is_tripped,
        "it is at its compliance voltage": read.is_at_compliance and read.is_on,
        "its output is off": must_be_on and not read.is_on,
    }
    found = [words for words, is_so in troubles.items() if is_so]
    if found:
        raise InstrumentError(" and ".join(found), where=role, do="Look at the bench before it emits again.")


def _values(read: ControllerConditions) -> dict[str, float]:
    return {"temperature_c": read.temperature_c, "resistance_ohm": read.resistance_ohm}
