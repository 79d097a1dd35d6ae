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
    StageCapabilities,
)
from rigctl.runner.approach import Standing, way_to
from rigctl.runner.driving import RAMP_A_PER_S
from rigctl.runner.plan import DARK_DWELLS, axis_name, settle_s, step_visits

EXCHANGE_S = 0.002
"""An ordinary exchange on a local network; common practice."""
SEEN_S = 0.02
"""From the end of a move until the mount is seen at rest, on average; measured on the simulated mounts."""
ROOM_C = 22.0
"""Where a temperature starts when nobody says; for the forecast only."""


class Forecast:
    """Adds up the time of a run on instruments with these capabilities, by role."""

    def __init__(self, recipe: Recipe, capabilities: Mapping[str, Capabilities]) -> None:
        self.recipe, self.capabilities = recipe, capabilities
        meters = [able for able in capabilities.values() if isinstance(able, MeterCapabilities)]
        self._slowest_s = max((tau for meter in meters for tau in meter.time_constant_s), default=0.0)
        others = sum(not isinstance(able, ShutterCapabilities) for able in capabilities.values())
        self._exchanges = 2 * len(meters) + others
        self._set: dict[str, float] = {}
        self._standing: dict[str, Standing] = {}

    def duration_s(self) -> float:
        """Return the time of the whole run, s."""
        total = sum(map(self._preparation_s, self.recipe.preparations))
        total += sum(map(self._step_s, self.recipe.steps))
        darks = sum((dark.before + dark.after) for dark in self.recipe.darks) * len(self.recipe.steps)
        timed = [total / dark.every_s for dark in self.recipe.darks if dark.every_s]
        return total + (darks + sum(timed)) * self._dark_s()

    def _dark_s(self) -> float:
        shutters = [able for able in self.capabilities.values() if isinstance(able, ShutterCapabilities)]
        moving_s = 2 * sum(able.moves_in_s for able in shutters)
        return DARK_DWELLS * self.recipe.dwell.time_s + settle_s(self.recipe.steps[0], self._slowest_s) + moving_s

    def _preparation_s(self, wanted: Preparation) -> float:
        able = self.capabilities.get(wanted.role)
        if isinstance(able, ControllerCapabilities):
            return self._temperature_s(wanted.role, wanted.to, able, wanted.steady)
        self._set[wanted.role] = wanted.to
        return wanted.to / (wanted.ramp_a_per_s or RAMP_A_PER_S) + wanted.warm_up_s

    def _step_s(self, step: Step) -> float:
        per_visit = settle_s(step, self._slowest_s) + self.recipe.dwell.time_s + self._exchanges * EXCHANGE_S
        total = 0.0
        for visit in step_visits(step):
            moves = [self._axis_s(axis, visit.asked[axis_name(axis)]) for axis in step.sweep]
            total += max(moves) + per_visit
        return total

    def _axis_s(self, axis: Axis, target: float) -> float:
        able, last = self.capabilities.get(axis.role), self._set.get(axis.role)
        if isinstance(able, StageCapabilities):
            return self._turn_s(axis, target, able)
        if last == target or axis.kind == "repeat":
            return 0.0
        if isinstance(able, ControllerCapabilities):
            return self._temperature_s(axis.role, target, able, axis.steady)
        self._set[axis.role] = target
        return abs(target - (last or 0.0)) / (axis.ramp_a_per_s or RAMP_A_PER_S)

    def _turn_s(self, axis: Axis, target_deg: float, stage: StageCapabilities) -> float:
        before = self._standing.get(axis.role)
        total, here = 0.0, 0.0 if before is None else before.angle_deg
        for point in way_to(target_deg, axis.approach, standing=before, backlash_deg=stage.backlash_deg):
            total += stage.travel_time_s(point - here) + SEEN_S
            here = point
        self._standing[axis.role] = Standing(target_deg, axis.approach)
        return total

    def _temperature_s(self, role: str, target_c: float, able: ControllerCapabilities, steady: Steady | None) -> float:
        change_k = abs(target_c - self._set.get(role, ROOM_C))
        self._set[role] = target_c
        return change_k / able.typical_rate_k_per_s + (steady.for_s if steady is not None else 0.0)
