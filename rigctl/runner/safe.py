"""Make safe: bring the bench to its safe state at every ending, and prove it by reading back.

Each step stands alone: whatever one does, the next is tried. Nothing here may be skipped by a stop request;
a second one skips waits only. It never raises. What was not confirmed is tried once more at the end, on a link that
found its step again or was opened anew.
"""

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from functools import partial

from rigctl.errors import InstrumentError, PolrigError
from rigctl.interfaces import Shutter
from rigctl.runner.bench import OpenBench
from rigctl.runner.driving import ramp
from rigctl.runner.limits import LimitedController, LimitedSource
from rigctl.runner.polling import complete
from rigctl.timeline import Timeline

CLOSED, OFF, STOPPED, NOT_REGULATING = "closed", "off", "stopped", "not regulating"


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

    def __str__(self) -> str:
        if self.is_confirmed:
            return f"'{self.role}' {self.wanted}"
        return f"'{self.role}' could not be confirmed {self.wanted}: {self.trouble}"


def make_safe(bench: OpenBench, timeline: Timeline, *, is_success: bool) -> tuple[SafeStep, ...]:
    """Close the shutter, take the source to zero and off, stop the mounts, and last leave or end regulating.

    Parameters
    ----------
    is_success
        Whether the run went well: only then does the current go down by a ramp.
    """
    with timeline.stop.masked():
        actions = list(_steps(bench, timeline, is_success=is_success))
        steps = [_try(bench, *action) for action in actions]
        # again only after everything had its first try: a dead shutter must not keep the source on meanwhile
        return tuple(
            step if step.is_confirmed else _try(bench, *action) for step, action in zip(steps, actions, strict=True)
        )


def is_beam_off(steps: tuple[SafeStep, ...]) -> bool:
    """Whether no light can leave the bench: every source was read back off, or else every shutter closed.

    A bench that has a source is safe only with the source off; also true where the bench has neither.
    """
    sources = [step for step in steps if step.wanted == OFF]
    shutters = [step for step in steps if step.wanted == CLOSED]
    return all(step.is_confirmed for step in sources or shutters)


def _steps(bench: OpenBench, timeline: Timeline, *, is_success: bool) -> Iterator[tuple[str, str, Callable[[], None]]]:
    if bench.shutter is not None:
        yield bench.shutter_role, CLOSED, partial(_close, bench.shutter, timeline)
    for role, source in bench.sources.items():
        yield role, OFF, partial(_switch_off, source, timeline, is_ramped=is_success)
    for role, stage in bench.stages.items():
        yield role, STOPPED, stage.stop
    for role, controller in bench.controllers.items():
        if not bench.keeps_regulating(role):
            yield role, NOT_REGULATING, partial(_end, controller)


def _close(shutter: Shutter, timeline: Timeline) -> None:
    if complete(timeline, {"shutter": shutter.begin_set(False)})["shutter"]:
        raise InstrumentError("it reads back open")


def _switch_off(source: LimitedSource, timeline: Timeline, *, is_ramped: bool) -> None:
    try:
        if is_ramped and source.set_a > 0.0:
            ramp(source, 0.0, timeline)
    finally:
        is_on = source.switch_off()
    if is_on:
        raise InstrumentError("its output reads back on")


def _end(controller: LimitedController) -> None:
    if controller.switch_off():
        raise InstrumentError("it reads back regulating")


def _try(bench: OpenBench, role: str, wanted: str, act: Callable[[], None]) -> SafeStep:
    try:
        bench.link(role).open()
        act()
    except PolrigError as error:
        return SafeStep(role, wanted, str(error))
    except Exception as error:  # noqa: BLE001  # even a driver's bug must not keep the next step from running
        return SafeStep(role, wanted, f"{type(error).__name__}: {error}")
    return SafeStep(role, wanted)
