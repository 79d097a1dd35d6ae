from collections.abc import Callable, Iterator
from datetime import UTC, datetime

import pytest

from rigctl.errors import InstrumentError, StopRequestedError
from rigctl.interfaces import Begun
from rigctl.runner.polling import complete
from rigctl.timeline import VirtualTimeline


@pytest.fixture
def timeline() -> Iterator[VirtualTimeline]:
    line = VirtualTimeline(datetime(2026, 1, 5, tzinfo=UTC))
    yield line
    line.stop.close()


def ready_at(timeline: VirtualTimeline, instant_s: float, value: float) -> Callable[[], float | None]:
    return lambda: value if timeline.now() >= instant_s else None


def begun(timeline: VirtualTimeline, *, due_s: float, ready_s: float, value: float = 1.0) -> Begun[float]:
    return Begun(due_s, ready_at(timeline, ready_s, value), again_s=0.5, give_up_s=due_s + 10.0)


def test_things_begun_together_take_as_long_as_the_slowest(timeline: VirtualTimeline) -> None:
    three = {name: begun(timeline, due_s=due, ready_s=due) for name, due in (("a", 3.0), ("b", 1.0), ("c", 2.0))}

    complete(timeline, three)

    assert timeline.now() == 3.0


def test_values_come_back_by_name_in_the_order_given(timeline: VirtualTimeline) -> None:
    two = {
        "slow": begun(timeline, due_s=2.0, ready_s=2.0, value=7.0),
        "quick": begun(timeline, due_s=1.0, ready_s=1.0, value=8.0),
    }

    assert list(complete(timeline, two).items()) == [("slow", 7.0), ("quick", 8.0)]


def test_what_is_not_ready_when_due_is_asked_again(timeline: VirtualTimeline) -> None:
    complete(timeline, {"late": begun(timeline, due_s=1.0, ready_s=1.7)})

    assert timeline.now() == 2.0


def test_a_value_of_false_is_a_value(timeline: VirtualTimeline) -> None:
    closed = Begun(1.0, lambda: False, again_s=1.0, give_up_s=2.0)

    assert complete(timeline, {"shutter": closed}) == {"shutter": False}


def test_what_never_finishes_is_given_up_with_its_name(timeline: VirtualTimeline) -> None:
    with pytest.raises(InstrumentError, match="part mount: did not finish"):
        complete(timeline, {"part mount": begun(timeline, due_s=1.0, ready_s=1e9)})

    assert 11.0 <= timeline.now() <= 12.0


def test_a_stop_request_ends_the_waiting(timeline: VirtualTimeline) -> None:
    timeline.stop.request("SIGINT")

    with pytest.raises(StopRequestedError):
        complete(timeline, {"a": begun(timeline, due_s=1.0, ready_s=1.0)})
