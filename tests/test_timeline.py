import os
import signal
import threading
import time
from collections.abc import Iterator
from datetime import UTC, datetime, timedelta

import pytest

from rigctl.errors import StopRequestedError
from rigctl.timeline import StopRequest, VirtualTimeline, WallTimeline, wall_time

START = datetime(2026, 1, 5, 18, 0, tzinfo=UTC)


@pytest.fixture
def stop() -> Iterator[StopRequest]:
    request = StopRequest()
    yield request
    request.close()


def test_virtual_time_moves_only_when_waited_for(stop: StopRequest) -> None:
    timeline = VirtualTimeline(START, stop)

    timeline.wait_until(3600.0)

    assert timeline.now() == 3600.0
    assert wall_time(timeline, 3600.0) == START + timedelta(hours=1)


def test_virtual_time_never_goes_back(stop: StopRequest) -> None:
    timeline = VirtualTimeline(START, stop)
    timeline.wait_until(10.0)

    timeline.wait_until(5.0)

    assert timeline.now() == 10.0


def test_a_wait_on_the_wall_clock_lasts_as_long_as_asked(stop: StopRequest) -> None:
    timeline = WallTimeline(stop)
    began = time.monotonic()

    timeline.wait_until(timeline.now() + 0.05)

    assert 0.05 <= time.monotonic() - began < 0.30


def test_a_stop_request_from_a_signal_handler_ends_a_long_wait(stop: StopRequest) -> None:
    timeline = WallTimeline(stop)
    before = signal.signal(signal.SIGUSR1, lambda _number, _frame: stop.request("SIGUSR1"))
    timer = threading.Timer(0.05, os.kill, (os.getpid(), signal.SIGUSR1))
    timer.start()
    began = time.monotonic()
    try:
        with pytest.raises(StopRequestedError, match="SIGUSR1"):
            timeline.wait_until(timeline.now() + 60.0)
    finally:
        signal.signal(signal.SIGUSR1, before)
        timer.join()

    assert time.monotonic() - began < 5.0


def test_every_later_wait_is_refused_once_a_stop_was_asked_for(stop: StopRequest) -> None:
    timeline = VirtualTimeline(START, stop)
    stop.request("SIGINT")

    with pytest.raises(StopRequestedError):
        timeline.wait_until(1.0)


def test_masked_waits_go_on_after_one_request(stop: StopRequest) -> None:
    timeline = WallTimeline(stop)
    stop.request("SIGINT")
    began = time.monotonic()

    with stop.masked():
        timeline.wait_until(timeline.now() + 0.05)

    assert time.monotonic() - began >= 0.05


def test_a_second_request_skips_masked_waits(stop: StopRequest) -> None:
    timeline = WallTimeline(stop)
    stop.request("SIGINT")
    stop.request("SIGINT")
    began = time.monotonic()

    with stop.masked():
        timeline.wait_until(timeline.now() + 60.0)

    assert time.monotonic() - began < 5.0


def test_a_flood_of_requests_never_blocks_the_signal_handler(stop: StopRequest) -> None:
    for _ in range(100_000):
        stop.request("SIGINT")

    assert len(stop.reasons) == 100_000
