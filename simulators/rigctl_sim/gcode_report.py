"""What motion firmware tells of its machine: status reports, build information, settings.

It owns texts only; it changes nothing but the count of its reports.
"""

from rigctl_sim.machine import MOST_PLANNED, Machine

LONGEST_LINE = 255
"""Bytes a line may have; common practice."""
ORDER = "XYZABC"
"""Order of the axes in a report."""
_LEAST_AXES = 3
_OFFSET_EVERY, _OVERRIDE_EVERY = 10, 20
"""Reports between two that carry the work frame's offset, or the overrides; common practice."""


class Reports:
    """Status reports in a row; some of their fields come now and then only."""

    def __init__(self) -> None:
        self._count = 0

    def next(self, machine: Machine, state: str, now_s: float) -> str:
        """Write the answer to `?`."""
        letters = _reported(machine)
        places = ",".join([f"{_shown_deg(machine, letter, now_s):.3f}" for letter in letters])
        speed = max([abs(axis.dial.speed(now_s)) for axis in machine.axes.values()])
        extra = ""
        if self._count % _OFFSET_EVERY == 0:
            extra = f"|WCO:{','.join(['0.000'] * len(letters))}"
        elif self._count % _OVERRIDE_EVERY == 1:
            extra = "|Ov:100,100,100"
        self._count += 1
        room = machine.room(now_s)
        return f"<{state}|MPos:{places}|Bf:{room},{LONGEST_LINE}|FS:{speed * 60.0:.0f},0{extra}>"


def build_lines(name: str) -> list[str]:
    """Write the answer to `$I`."""
    return [f"[VER:1.1:simulated mount,{name}]", f"[OPT:VH,{MOST_PLANNED},{LONGEST_LINE}]"]


def setting_lines(machine: Machine) -> list[str]:
    """Write the answer to `$$`: steps per deg, top speed in deg/min, acceleration and travel of each axis."""
    lines = ["$10=1", "$20=1", "$22=1"]
    for letter, axis in machine.axes.items():
        make, number = axis.make, ORDER.index(letter)
        lines += [
            f"${100 + number}={1.0 / make.resolution_deg:.3f}",
            f"${110 + number}={make.speed_deg_per_s * 60.0:.3f}",
            f"${120 + number}={make.acceleration_deg_per_s2:.3f}",
            f"${130 + number}={make.travel_deg[1] - make.travel_deg[0]:.3f}",
        ]
    return lines


def _reported(machine: Machine) -> str:
    """Letters of a report: every axis up to the machine's last, and three at least."""
    last = max([ORDER.index(letter) for letter in machine.axes])
    return ORDER[: max(last + 1, _LEAST_AXES)]


def _shown_deg(machine: Machine, letter: str, now_s: float) -> float:
    axis = machine.axes.get(letter)
    # adding zero turns -0.0 into 0.0
    return 0.0 if axis is None else round(axis.counted_deg(now_s), 3) + 0.0
