"""One visit: move, settle, dwell; and one dark.

It owns the sequence of a single stop and remembers where each mount stands, so that one-sided approaches hold.
It never retries and never writes the run file.
"""

from collections.abc import Mapping
from typing import Any

from rigctl.files.recipe import Axis, Recipe, Step
from rigctl.interfaces import Dwell, Flag
from rigctl.record.records import dwell_record
from rigctl.runner.approach import Standing, way_to
from rigctl.runner.bench import OpenBench
from rigctl.runner.person import Person
from rigctl.runner.plan import DARK_DWELLS, Visit, settle_s
from rigctl.runner.polling import complete
from rigctl.timeline import Timeline

Record = dict[str, Any]


class Visiting:
    """Takes visits and darks on an open bench."""

    def __init__(self, bench: OpenBench, recipe: Recipe, timeline: Timeline, person: Person) -> None:
        self.bench, self.recipe, self.timeline, self.person = bench, recipe, timeline, person
        self._is_blocked_by_hand = False
        self._ranges_w: dict[str, float] = {}
        self._standing: dict[str, Standing] = {}
        self._read_deg: dict[str, float] = {}

    def use_range(self, role: str, power_w: float) -> float:
        """Fix the smallest range of a meter that holds a power; returns its full scale, W."""
        meter = self.bench.meters[role]
        self._ranges_w[role] = meter.set_range(min(power_w, meter.capabilities.ranges_w[-1]))
        return self._ranges_w[role]

    def raise_range(self, role: str) -> bool:
        """Go to a meter's next larger range; False when it is on its largest."""
        larger = [full for full in self.bench.meters[role].capabilities.ranges_w if full > self._ranges_w[role] * 1.01]
        if larger:
            self.use_range(role, larger[0])
        return bool(larger)

    def forget_positions(self) -> None:
        """Trust no angle: the next approach starts from the far side."""
        self._standing.clear()

    def take(self, visit: Visit, step: Step) -> Record:
        """Move, settle and dwell; return the visit's record without its attempt and status."""
        began_s = self.timeline.now()
        self._move(visit, step)
        self._wait(settle_s(step, self._slowest_s()))
        dwells = self._dwell()
        return {
            "kind": "visit",
            "step": visit.step,
            "visit": visit.number,
            "index": list(visit.index),
            "t_begin": began_s,
            "t_end": self.timeline.now(),
            "asked": dict(visit.asked_deg),
            "read": {role: self._read_deg[role] for role in visit.asked_deg},
            "detectors": {role: dwell_record(dwell) for role, dwell in dwells.items()},
        }

    def dark(self, step: str, when: str) -> list[Record]:
        """Block the beam, dwell several times, clear it; return a record for each dwell."""
        how = self._block()
        self._wait(settle_s(self.recipe.steps[0], self._slowest_s()))
        records: list[Record] = []
        for _ in range(DARK_DWELLS):
            began_s = self.timeline.now()
            detectors = {role: dwell_record(dwell) for role, dwell in self._dwell().items()}
            times = {"t_begin": began_s, "t_end": self.timeline.now()}
            records.append({"kind": "dark", "step": step, "when": when, "how": how, **times, "detectors": detectors})
        return records

    def open_beam(self) -> None:
        """Let the light in: open the shutter, and ask for the hand's block to be taken away where there is one."""
        self.set_shutter(is_open=True)
        if self._is_blocked_by_hand:
            self.person.clear_beam()
            self._is_blocked_by_hand = False

    def set_shutter(self, *, is_open: bool) -> None:
        """Open or close the shutter, where there is one."""
        if self.bench.shutter is not None:
            self.bench.has_let_light_in |= is_open
            complete(self.timeline, {self.bench.shutter_role: self.bench.shutter.begin_set(is_open)})

    def _block(self) -> str:
        """Block the beam as the recipe says; by hand where the rig has no shutter."""
        is_by_hand = is_dark_by_hand(self.recipe, self.bench.shutter is not None)
        if not is_by_hand:
            self.set_shutter(is_open=False)
            return "by shutter"
        if not self._is_blocked_by_hand:
            self.person.block_beam()
            self._is_blocked_by_hand = True
        return "by hand"

    def _move(self, visit: Visit, step: Step) -> None:
        """Turn every mount that is not there yet, all together, each from its own side."""
        ways = {axis.role: self._way(axis, visit.asked_deg[axis.role]) for axis in step.sweep}
        ways = {role: way for role, way in ways.items() if way}
        for role in ways:
            self._standing.pop(role, None)
        while ways:
            stages = {role: self.bench.stages[role].begin_move(way.pop(0)) for role, way in ways.items()}
            self._read_deg.update(complete(self.timeline, stages))
            ways = {role: way for role, way in ways.items() if way}
        self._standing.update({axis.role: Standing(visit.asked_deg[axis.role], axis.approach) for axis in step.sweep})

    def _way(self, axis: Axis, target_deg: float) -> list[float]:
        backlash_deg = self.bench.stages[axis.role].capabilities.backlash_deg
        standing = self._standing.get(axis.role)
        return list(way_to(target_deg, axis.approach, standing=standing, backlash_deg=backlash_deg))

    def _dwell(self) -> Mapping[str, Dwell]:
        begun = {role: meter.begin_dwell() for role, meter in self.bench.meters.items()}
        return complete(self.timeline, begun)

    def _slowest_s(self) -> float:
        """Time constant of the slowest meter on the range it is on, s."""
        slowest = 0.0
        for role, meter in self.bench.meters.items():
            able = meter.capabilities
            on_range = [
                tau
                for full, tau in zip(able.ranges_w, able.time_constant_s, strict=True)
                if full >= self._ranges_w[role] * 0.99
            ]
            slowest = max(slowest, on_range[0])
        return slowest

    def _wait(self, duration_s: float) -> None:
        self.timeline.wait_until(self.timeline.now() + duration_s)


def is_dark_by_hand(recipe: Recipe, has_shutter: bool) -> bool:
    """Whether darks of a recipe need somebody's hands."""
    return recipe.dark is not None and (recipe.dark.by == "hand" or not has_shutter)


def is_overloaded(record: Record) -> list[str]:
    """Return the detectors of a visit that were overloaded."""
    return [role for role, seen in record["detectors"].items() if seen["flags"] & Flag.OVERLOAD]
