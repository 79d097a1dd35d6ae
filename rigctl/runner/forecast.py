"""How long a run takes, before it is begun.

Pure: a function of the recipe and of what the instruments declare. A temperature's time to become steady is a guess.
"""

from collections.abc import Mapping

from rigctl.files.recipe import Axis, Preparation, Recipe, Steady, Step
from rigctl.interfaces import (
    Capabilities,
    ControllerCapabilities,
    MeterCapabilities,
    ShutterCapabilities,
    SourceCapabilities,
    StageCapabilities,
)
from rigctl.runner.approach import Standing, way_to
from rigctl.runner.driving import RAMP_A_PER_S
from rigctl.runner.plan import DARK_DWELLS, Visit, settle_s, step_visits
from rigctl.runner.steady import STEADY

EXCHANGE_S = 0.002
"""An ordinary exchange on a local network; common practice."""
SEEN_S = 0.002
"""From the end of a move until the mount is seen at rest, on average; measured on the simulated mounts."""
ROOM_C = 22.0
"""Where a temperature starts when nobody says; for the forecast only."""


class Forecast:
    """Adds up the time of a run on instruments with these capabilities, by role."""

    def __init__(self, recipe: Recipe, capabilities: Mapping[str, Capabilities]) -> None:
        self.recipe, self.capabilities = recipe, capabilities
        meters = [able for able in capabilities.values() if isinstance(able, MeterCapabilities)]
        shutters = [able for able in capabilities.values() if isinstance(able, ShutterCapabilities)]
        self._slowest_s = max((tau for meter in meters for tau in meter.time_constant_s), default=0.0)
        self._shutter_s = sum(able.moves_in_s for able in shutters)
        self._exchanges = 2 * len(meters) + len(capabilities) - len(shutters)
        self._set: dict[str, float] = {}
        self._wanted_a: dict[str, float] = {}
        self._standing: dict[str, Standing] = {}

    def duration_s(self) -> float:
        """Return the time of the whole run, s."""
        # the shutter is told at the start and at the end; what stands on a source goes down at the end
        total = 2 * self._shutter_s + sum(map(self._preparation_s, self.recipe.preparations))
        total += sum(map(self._step_s, self.recipe.steps))
        total += sum(self._current_s(role, 0.0, None) for role in self._wanted_a)
        once = sum(dark.before + dark.after for dark in self.recipe.darks if dark.kind != "dark")
        return total + once * self._dark_s()

    def _dark_s(self) -> float:
        """Time of a dark and of letting the light in again, s."""
        settling_s = settle_s(self.recipe.steps[0], self._slowest_s)
        return DARK_DWELLS * self.recipe.dwell.time_s + settling_s + 2 * self._shutter_s

    def _preparation_s(self, wanted: Preparation) -> float:
        if isinstance(self.capabilities.get(wanted.role), SourceCapabilities):
            return self._current_s(wanted.role, wanted.to, wanted.ramp_a_per_s) + wanted.warm_up_s
        return self._temperature_s(wanted.role, wanted.to, wanted.steady)

    def _step_s(self, step: Step) -> float:
        per_visit = settle_s(step, self._slowest_s) + self.recipe.dwell.time_s + self._exchanges * EXCHANGE_S
        total = 0.0
        for visit in step_visits(step):
            total += self._arrival_s(step, visit) + per_visit
        darks = [dark for dark in self.recipe.darks if dark.kind == "dark"]
        around = sum(dark.before + dark.after for dark in darks)
        during = sum(total // dark.every_s for dark in darks if dark.every_s)
        # around the step the shutter closes and opens once, whatever is taken there
        return total + (around + during) * self._dark_s() + (2 - around) * self._shutter_s

    def _arrival_s(self, step: Step, visit: Visit) -> float:
        """Temperatures, then currents, then all mounts together."""
        total, turns = 0.0, [0.0]
        for axis in step.sweep:
            if axis.kind == "temperature":
                total += self._temperature_s(axis.role, visit.asked[axis.role], axis.steady)
        for axis in step.sweep:
            if axis.kind == "current":
                total += self._current_s(axis.role, visit.asked[axis.role], axis.ramp_a_per_s)
            able = self.capabilities.get(axis.role)
            if isinstance(able, StageCapabilities):
                turns.append(self._turn_s(axis, visit.asked[axis.role], able))
        total += sum(self._current_s(role, to_a, None) for role, to_a in self._wanted_a.items())
        return total + max(turns)

    def _current_s(self, role: str, to_a: float, rate_a_per_s: float | None) -> float:
        change_a = abs(to_a - self._set.get(role, 0.0))
        self._set[role] = self._wanted_a[role] = to_a
        return change_a / (rate_a_per_s or RAMP_A_PER_S)

    def _turn_s(self, axis: Axis, target_deg: float, stage: StageCapabilities) -> float:
        before = self._standing.get(axis.role)
        total, here = 0.0, 0.0 if before is None else before.angle_deg
        for point in way_to(target_deg, axis.approach, standing=before, backlash_deg=stage.backlash_deg):
            total += stage.travel_time_s(point - here) + SEEN_S
            here = point
        self._standing[axis.role] = Standing(target_deg, axis.approach)
        return total

    def _temperature_s(self, role: str, target_c: float, steady: Steady | None) -> float:
        able, last_c = self.capabilities.get(role), self._set.get(role, ROOM_C)
        if self._set.get(role) == target_c or not isinstance(able, ControllerCapabilities):
            return 0.0
        self._set[role] = target_c
        return self._rest_s(role) + abs(target_c - last_c) / able.typical_rate_k_per_s + (steady or STEADY).for_s

    def _rest_s(self, controller: str) -> float:
        """Time for the diode's current to go down before its temperature moves, s."""
        driver = self.recipe.source.driven_by
        if controller != self.recipe.source.cooled_by or driver is None:
            return 0.0
        set_a, self._set[driver] = self._set.get(driver, 0.0), 0.0
        return set_a / RAMP_A_PER_S
