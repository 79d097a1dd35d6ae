"""Make safe: bring the bench to its safe state at every ending, and prove it by reading back.

Each step stands alone: whatever one does, the next is tried. Nothing here may be skipped by a stop request;
a second one skips waits only. It never raises.
"""

from collections.abc import Callable
from dataclasses import dataclass

from rigctl.errors import InstrumentError, PolrigError
from rigctl.interfaces import Shutter
from rigctl.runner.bench import OpenBench
from rigctl.runner.polling import complete
from rigctl.timeline import Timeline

TRIES = 2
"""The second try runs on a link that found its step again, or was opened anew."""


@dataclass(frozen=True, slots=True)
class SafeStep:
    """One step of making safe: which role, what was wanted, and what went wrong (empty: confirmed)."""

    role: str
    wanted: str
    trouble: str = ""

    @property
    def is_confirmed(self) -> bool:
        """Whether the state was read back as wanted."""
        return not self.trouble


def make_safe(bench: OpenBench, timeline: Timeline) -> tuple[SafeStep, ...]:
    """Close the shutter first, then stop the mounts; return what was confirmed."""
    with timeline.stop.masked():
        steps = []
        if bench.shutter is not None:
            shutter = bench.shutter
            steps.append(_try(bench, bench.shutter_role, "closed", lambda: _close(shutter, timeline)))
        for role, stage in bench.stages.items():
            steps.append(_try(bench, role, "stopped", stage.stop))
        return tuple(steps)


def is_beam_blocked(steps: tuple[SafeStep, ...]) -> bool:
    """Whether every shutter was read back closed; also true where the bench has none to close."""
    return all(step.is_confirmed for step in steps if step.wanted == "closed")


def _close(shutter: Shutter, timeline: Timeline) -> None:
    if complete(timeline, {"shutter": shutter.begin_set(False)})["shutter"]:
        raise InstrumentError("it reads back open", where="shutter")


def _try(bench: OpenBench, role: str, wanted: str, act: Callable[[], None]) -> SafeStep:
    trouble = ""
    for _ in range(TRIES):
        try:
            bench.link(role).open()
            act()
        except Exception as error:  # noqa: BLE001  # even a driver's bug must not keep the next step from running
            trouble = str(error) if isinstance(error, PolrigError) else f"{type(error).__name__}: {error}"
        else:
            return SafeStep(role, wanted)
    return SafeStep(role, wanted, trouble)
