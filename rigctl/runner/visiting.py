"""One visit: bring everything there, settle, dwell.

It owns the sequence of a single stop and remembers where each mount stands, so that one-sided approaches hold.
It never retries and never writes the run file.
"""

from collections.abc import Mapping
from typing import Any

from rigctl.files.recipe import Axis, Step
from rigctl.interfaces import Dwell, Flag
from rigctl.record.records import dwell_record
from rigctl.runner.approach import Standing, way_to
from rigctl.runner.bench import OpenBench
from rigctl.runner.plan import Visit, axis_name, settle_s
from rigctl.runner.polling import complete
from rigctl.runner.prepare import Climate
from rigctl.timeline import Timeline

Record = dict[str, Any]


class Visiting:
    """Takes visits on an open bench."""

    def __init__(self, bench: OpenBench, timeline: Timeline, climate: Climate) -> None:
        self.bench, self.timeline, self.climate = bench, timeline, climate
        self.used_ranges_w: dict[str, set[float]] = {role: set() for role in bench.meters}
        self._ranges_w: dict[str, float] = {}
        self._standing: dict[str, Standing] = {}
        self._read_deg: dict[str, float] = {}

    def use_range(self, role: str, power_w: float) -> float:
        """Fix the smallest range of a meter that holds a power; returns its full scale, W."""
        meter = self.bench.meters[role]
        self._ranges_w[role] = meter.set_range(min(power_w, meter.capabilities.ranges_w[-1]))
        return self._ranges_w[role]

    def range_w(self, role: str) -> float:
        """Return the range that a meter is on, W."""
        return self._ranges_w[role]

    def raise_range(self, role: str) -> bool:
        """Go to a meter's next larger range; False when it is on its largest."""
        able = self.bench.meters[role].capabilities
        larger = [full for full in able.ranges_w if full > self._ranges_w[role] * 1.01]
        if larger:
            self.use_range(role, larger[0])
        return bool(larger)

    def forget_positions(self) -> None:
        """Trust no angle: the next approach starts from the far side."""
        self._standing.clear()

    def take(self, visit: Visit, step: Step) -> Record:
        """Bring everything there, settle and dwell; return the visit's record without its attempt and status."""
        began_s = self.timeline.now()
        read = self._arrive(visit, step)
        self.wait(settle_s(step, self.slowest_s()))
        dwells = self.dwell()
        for role, dwell in dwells.items():
            self.used_ranges_w[role].add(dwell.range_w)
        conditions = self.climate.conditions()
        return {
            "kind": "visit",
            "step": visit.step,
            "visit": visit.number,
            "index": list(visit.index),
            "t_begin": began_s,
            "t_end": self.timeline.now(),
            "asked": dict(visit.asked),
            "read": {**read, **_read_back(step, conditions)},
            "detectors": {role: dwell_record(dwell) for role, dwell in dwells.items()},
            "conditions": conditions,
        }

    def dwell(self) -> Mapping[str, Dwell]:
        """Have every meter read at once."""
        begun = {role: meter.begin_dwell() for role, meter in self.bench.meters.items()}
        return complete(self.timeline, begun)

    def slowest_s(self) -> float:
        """Return the time constant of the slowest meter on the range it is on, s."""
        slowest = 0.0
        for role, meter in self.bench.meters.items():
            able = meter.capabilities
            fitting = (full >= self._ranges_w[role] * 0.99 for full in able.ranges_w)
            slowest = max(slowest, able.time_constant_s[next(at for at, fits in enumerate(fitting) if fits)])
        return slowest

    def wait(self, duration_s: float) -> None:
        """Let time pass."""
        self.timeline.wait_until(self.timeline.now() + duration_s)

    def _arrive(self, visit: Visit, step: Step) -> dict[str, float]:
        """Bring temperatures, then currents, then all mounts together; return the angles reached."""
        for axis in step.sweep:
            wanted = visit.asked[axis_name(axis)]
            if axis.kind == "temperature":
                self.climate.set_temperature(axis.role, wanted, axis.steady)
        for axis in step.sweep:
            if axis.kind == "current":
                self.climate.set_current(axis.role, visit.asked[axis.role], axis.ramp_a_per_s)
        self.climate.bring_back()
        turning = [axis for axis in step.sweep if axis.kind == "angle"]
        self._turn(turning, visit.asked)
        return {axis.role: self._read_deg[axis.role] for axis in turning}

    def _turn(self, axes: list[Axis], asked: Mapping[str, float]) -> None:
        """Turn every mount that is not there yet, all together, each from its own side."""
        ways = {axis.role: way for axis in axes if (way := self._way(axis, asked[axis.role]))}
        for role in ways:
            self._standing.pop(role, None)
        while ways:
            moves = {role: self.bench.stages[role].begin_move(way.pop(0)) for role, way in ways.items()}
            self._read_deg.update(complete(self.timeline, moves))
            ways = {role: way for role, way in ways.items() if way}
        self._standing.update({axis.role: Standing(asked[axis.role], axis.approach) for axis in axes})

    def _way(self, axis: Axis, target_deg: float) -> list[float]:
        backlash_deg = self.bench.stages[axis.role].capabilities.backlash_deg
        standing = self._standing.get(axis.role)
        return list(way_to(target_deg, axis.approach, standing=standing, backlash_deg=backlash_deg))


def _read_back(step: Step, conditions: Mapping[str, Mapping[str, float]]) -> dict[str, float]:
    """Return temperatures and currents of a step's axes as they were read back."""
    names = {"temperature": "temperature_c", "current": "current_a"}
    return {axis.role: conditions[axis.role][names[axis.kind]] for axis in step.sweep if axis.kind in names}


def is_overloaded(record: Record) -> list[str]:
    """Return the detectors of a visit that were overloaded."""
    return [role for role, seen in record["detectors"].items() if seen["flags"] & Flag.OVERLOAD]
