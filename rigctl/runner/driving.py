"""Moves a diode's current: always by a ramp, except when the bench is made safe in a hurry."""

from rigctl.runner.limits import LimitedSource
from rigctl.timeline import Timeline

RAMP_A_PER_S = 0.005
"""Where the recipe says nothing: 5 mA a second is slow for every diode of this class; common practice."""
STEP_S = 0.1


def ramp(source: LimitedSource, current_a: float, timeline: Timeline, *, rate_a_per_s: float | None = None) -> None:
    """Bring a current up or down in small steps.

    The limit is checked for the end of the ramp before its first step is sent.
    """
    rate = rate_a_per_s or RAMP_A_PER_S
    source.refuse_beyond(current_a)
    while abs(left_a := current_a - source.set_a) > 0.0:
        step_a = min(abs(left_a), rate * STEP_S)
        is_last = step_a >= abs(left_a)
        source.set_current(current_a if is_last else source.set_a + (step_a if left_a > 0.0 else -step_a))
        if not is_last:
            timeline.wait_until(timeline.now() + STEP_S)
