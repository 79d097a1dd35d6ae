import math
from collections.abc import Callable, Iterator
from datetime import UTC, datetime

import pytest

from rigctl.errors import InstrumentError, StopRequestedError
from rigctl.files.recipe import Steady
from rigctl.interfaces import ControllerConditions
from rigctl.runner.limits import Bound, ControllerLimits, LimitedController
from rigctl.runner.steady import Settling, wait_until_steady
from rigctl.timeline import VirtualTimeline

FREE = ControllerLimits(Bound(-50.0, "nobody"), Bound(150.0, "nobody"))


@pytest.fixture
def timeline() -> Iterator[VirtualTimeline]:
    line = VirtualTimeline(datetime(2026, 1, 5, tzinfo=UTC))
    yield line
    line.stop.close()


def controller(timeline: VirtualTimeline, course: Callable[[float], float], to_c: float = 25.0) -> LimitedController:
    """A controller whose temperature is a function of time."""

    class Plant:
        def set_temperature(self, temperature_c: float) -> float:
            return temperature_c

        def set_output(self, is_on: bool) -> bool:
            return is_on

        def conditions(self) -> ControllerConditions:
            return ControllerConditions(course(timeline.now()), 1e4, True, False)

    limited = LimitedController(Plant(), FREE, "oven")  # type: ignore[arg-type]
    limited.set_temperature(to_c)
    return limited


def exponential(start_c: float, end_c: float, tau_s: float) -> Callable[[float], float]:
    return lambda t: end_c + (start_c - end_c) * math.exp(-t / tau_s)


def test_it_waits_until_the_band_is_entered_and_then_for_the_time_asked(timeline: VirtualTimeline) -> None:
    oven = controller(timeline, exponential(20.0, 25.0, 60.0))

    wait_until_steady(oven, Steady(within_k=0.05, for_s=120.0, give_up_s=3600.0), timeline)

    # 5 K have shrunk to 0.05 K after 60 s * ln(100)
    assert timeline.now() == pytest.approx(60.0 * math.log(100.0) + 120.0, abs=2.0)


def test_a_slope_that_is_too_steep_keeps_it_waiting_inside_the_band(timeline: VirtualTimeline) -> None:
    drifting = controller(timeline, lambda t: 25.0 + 0.04 * math.exp(-t / 600.0))
    quick = Steady(within_k=0.05, for_s=60.0, give_up_s=7200.0)
    wait_until_steady(drifting, quick, timeline)
    band_only_s = timeline.now()

    wait_until_steady(drifting, Steady(within_k=0.05, for_s=60.0, give_up_s=7200.0, slope_k_per_s=1e-5), timeline)

    assert band_only_s == pytest.approx(60.0, abs=2.0)
    # 0.04/600 exp(-t/600) = 1e-5 at t = 600 ln(6.67)
    assert timeline.now() > 600.0 * math.log(0.04 / 600.0 / 1e-5) - 60.0


def test_leaving_the_band_starts_the_time_anew(timeline: VirtualTimeline) -> None:
    bumped = controller(timeline, lambda t: 26.0 if 50.0 <= t < 55.0 else 25.0)

    wait_until_steady(bumped, Steady(within_k=0.1, for_s=60.0, give_up_s=600.0), timeline)

    assert timeline.now() == pytest.approx(115.0, abs=2.0)


def test_what_never_gets_steady_is_given_up_with_its_last_reading(timeline: VirtualTimeline) -> None:
    cold = controller(timeline, lambda _t: 20.0)

    with pytest.raises(InstrumentError, match=r"oven: is not steady .* it reads 20\.000 degC"):
        wait_until_steady(cold, Steady(within_k=0.1, for_s=60.0, give_up_s=900.0), timeline)

    assert 900.0 <= timeline.now() <= 905.0


def test_every_look_is_told(timeline: VirtualTimeline) -> None:
    heard: list[float] = []

    wait_until_steady(
        controller(timeline, lambda _t: 25.0),
        Steady(within_k=0.1, for_s=10.0, give_up_s=60.0),
        timeline,
        tell=lambda role, read: heard.append(read.temperature_c),
    )

    assert heard == [25.0] * 11


def test_a_stop_request_ends_the_waiting(timeline: VirtualTimeline) -> None:
    oven = controller(timeline, lambda _t: 20.0)
    timeline.stop.request("SIGTERM")

    with pytest.raises(StopRequestedError):
        wait_until_steady(oven, Steady(within_k=0.1, for_s=60.0, give_up_s=900.0), timeline)


def test_the_slope_is_that_of_the_least_squares_line() -> None:
    settling = Settling(25.0, Steady(within_k=1.0, for_s=1e9, give_up_s=1e9))
    for at_s in range(10):
        settling.look(float(at_s), 25.0 + 0.003 * at_s)

    assert settling.slope_k_per_s() == pytest.approx(0.003, rel=1e-12)
