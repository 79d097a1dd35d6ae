from collections.abc import Iterator
from datetime import UTC, datetime

import pytest
from test_runner_limits import LIMITS, Source

from rigctl.errors import LimitError, StopRequestedError
from rigctl.runner.driving import RAMP_A_PER_S, ramp
from rigctl.runner.limits import LimitedSource
from rigctl.timeline import VirtualTimeline


@pytest.fixture
def timeline() -> Iterator[VirtualTimeline]:
    line = VirtualTimeline(datetime(2026, 1, 5, tzinfo=UTC))
    yield line
    line.stop.close()


def currents(source: Source) -> list[float]:
    return [value for name, value in source.log if name == "current"]


def test_a_ramp_takes_the_time_that_its_rate_asks_for(timeline: VirtualTimeline) -> None:
    source = Source()

    ramp(LimitedSource(source, LIMITS, "diode"), 0.034, timeline, rate_a_per_s=0.005)

    assert timeline.now() == pytest.approx(0.034 / 0.005, abs=0.2)
    assert currents(source)[-1] == 0.034


def test_no_step_of_a_ramp_is_larger_than_its_rate_allows(timeline: VirtualTimeline) -> None:
    source = Source()

    ramp(LimitedSource(source, LIMITS, "diode"), 0.034, timeline)

    steps = [b - a for a, b in zip([0.0, *currents(source)], currents(source), strict=False)]
    assert max(steps) <= RAMP_A_PER_S * 0.1 * 1.000001
    assert min(steps) > 0.0


def test_a_ramp_goes_down_as_gently_as_up(timeline: VirtualTimeline) -> None:
    source = Source()
    limited = LimitedSource(source, LIMITS, "diode")
    ramp(limited, 0.02, timeline)
    up = len(currents(source))

    ramp(limited, 0.0, timeline)

    assert len(currents(source)) == 2 * up
    assert currents(source)[-1] == 0.0


def test_a_ramp_beyond_the_limit_does_not_take_its_first_step(timeline: VirtualTimeline) -> None:
    source = Source()

    with pytest.raises(LimitError):
        ramp(LimitedSource(source, LIMITS, "diode"), 0.0451, timeline)

    assert source.log == []


def test_a_stop_request_ends_a_ramp_where_it_is(timeline: VirtualTimeline) -> None:
    source = Source()
    limited = LimitedSource(source, LIMITS, "diode")

    timeline.stop.request("SIGINT")
    with pytest.raises(StopRequestedError):
        ramp(limited, 0.03, timeline)

    assert max(currents(source)) < 0.03
