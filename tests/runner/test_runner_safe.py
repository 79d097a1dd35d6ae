"""Making safe: each step alone, a second try on a link that was lost, and what stop requests may not do."""

import time
from collections.abc import Callable, Iterator
from datetime import UTC, datetime
from pathlib import Path

import pytest
from rehearsal_cases import SHUTTER, Meddler, make_job
from runner_cases import FakeShutter, FakeStage, fake_bench, opened

from rigctl.errors import DisconnectedError, MotionError, StopRequestedError
from rigctl.interfaces import Begun
from rigctl.links.channel import Channel
from rigctl.runner.safe import SafeStep, is_beam_off, make_safe
from rigctl.timeline import Timeline, VirtualTimeline, WallTimeline


@pytest.fixture
def timeline() -> Iterator[VirtualTimeline]:
    line = VirtualTimeline(datetime(2026, 1, 5, tzinfo=UTC))
    yield line
    line.stop.close()


@pytest.fixture
def wall() -> Iterator[WallTimeline]:
    line = WallTimeline()
    yield line
    line.stop.close()


class BuggyShutter(FakeShutter):
    """A shutter whose driver has a bug."""

    def begin_set(self, is_open: bool) -> Begun[bool]:
        raise ZeroDivisionError("a bug")


def failing(error: Exception, *, times: int) -> Callable[[], None]:
    left = [times]

    def act() -> None:
        left[0] -= 1
        if left[0] >= 0:
            raise error

    return act


def test_the_shutter_is_closed_before_any_mount_is_stopped(timeline: VirtualTimeline) -> None:
    shutter = FakeShutter(timeline, states=[True])
    seen: list[list[bool]] = []
    stage = FakeStage(timeline, act=lambda: seen.append(list(shutter.states)))

    steps = make_safe(fake_bench(timeline, shutter=shutter, stages={"part mount": stage}), timeline, is_success=True)

    assert seen == [[True, False]]
    assert steps == (SafeStep("shutter", "closed"), SafeStep("part mount", "stopped"))


def test_a_bug_in_the_shutter_s_driver_does_not_keep_the_mounts_turning(timeline: VirtualTimeline) -> None:
    stages = {"analyser": FakeStage(timeline), "part mount": FakeStage(timeline)}

    steps = make_safe(fake_bench(timeline, shutter=BuggyShutter(timeline), stages=stages), timeline, is_success=True)

    assert [step.is_confirmed for step in steps] == [False, True, True]
    assert steps[0].trouble == "ZeroDivisionError: a bug"
    assert [stage.stops for stage in stages.values()] == [1, 1]


def test_a_mount_that_will_not_stop_does_not_keep_the_next_from_stopping(timeline: VirtualTimeline) -> None:
    stuck = FakeStage(timeline, act=failing(MotionError("it does not stop"), times=99))
    other = FakeStage(timeline)

    steps = make_safe(fake_bench(timeline, stages={"analyser": stuck, "part mount": other}), timeline, is_success=True)

    assert [(step.role, step.trouble) for step in steps] == [("analyser", "it does not stop"), ("part mount", "")]
    assert (stuck.stops, other.stops) == (2, 1)


def test_a_step_that_fails_once_is_tried_a_second_time(timeline: VirtualTimeline) -> None:
    stage = FakeStage(timeline, act=failing(MotionError("not yet"), times=1))

    (step,) = make_safe(fake_bench(timeline, stages={"part mount": stage}), timeline, is_success=True)

    assert step.is_confirmed
    assert stage.stops == 2


def test_a_shutter_that_reads_back_open_is_not_confirmed_closed(timeline: VirtualTimeline) -> None:
    shutter = FakeShutter(timeline, reads_back=lambda _told: True)

    steps = make_safe(fake_bench(timeline, shutter=shutter), timeline, is_success=True)

    assert shutter.states == [False, False]
    assert "it reads back open" in steps[0].trouble
    assert not is_beam_off(steps)


def test_the_beam_counts_as_blocked_only_when_every_shutter_was_read_back_closed() -> None:
    closed, lost = SafeStep("shutter", "closed"), SafeStep("shutter", "closed", "no reply")
    stuck = SafeStep("part mount", "stopped", "it does not stop")

    assert is_beam_off((closed, stuck))
    assert not is_beam_off((closed, lost))
    assert is_beam_off((stuck,))


class Unplugged(Meddler):
    """A channel whose connection is gone from the first write on; `plugs` counts how many were opened."""

    def write(self, data: bytes, deadline_s: float) -> None:
        raise DisconnectedError("the connection is gone", address=self.address)


@pytest.mark.parametrize(("gone", "is_confirmed"), [(1, True), (2, False)])
def test_a_lost_link_is_opened_again_for_the_second_try(gone: int, is_confirmed: bool, tmp_path: Path) -> None:
    plugged: list[Channel] = []

    def wrap(channel: Channel, _timeline: Timeline) -> Channel:
        if channel.address != SHUTTER:
            return channel
        plugged.append(channel)
        is_gone = len(plugged) <= gone
        return Unplugged(channel, lambda: None, at=b"never", nth=1) if is_gone else channel

    job = make_job(tmp_path / "run.h5", wrap=wrap)
    with opened(job) as bench:
        steps = make_safe(bench, job.timeline, is_success=True)

    assert len(plugged) == 2
    assert [step.is_confirmed for step in steps] == [is_confirmed, True]


def test_a_stop_request_is_held_back_until_the_bench_is_safe(timeline: VirtualTimeline) -> None:
    shutter = FakeShutter(timeline, moves_in_s=2.0)
    timeline.stop.request("SIGINT")

    (step,) = make_safe(fake_bench(timeline, shutter=shutter), timeline, is_success=True)

    assert step.is_confirmed
    assert timeline.now() == 2.0
    with pytest.raises(StopRequestedError):
        timeline.stop.check()


def test_a_request_that_comes_while_the_bench_is_made_safe_skips_no_command(timeline: VirtualTimeline) -> None:
    stages = {name: FakeStage(timeline) for name in ("analyser", "part mount")}
    stages["analyser"].act = lambda: timeline.stop.request("SIGTERM")

    steps = make_safe(fake_bench(timeline, shutter=FakeShutter(timeline), stages=stages), timeline, is_success=True)

    assert all(step.is_confirmed for step in steps)
    assert stages["part mount"].stops == 1


def test_a_second_request_skips_the_waits_but_not_the_commands(wall: WallTimeline) -> None:
    shutter, stage = FakeShutter(wall, moves_in_s=60.0), FakeStage(wall)
    wall.stop.request("SIGINT")
    wall.stop.request("SIGINT")
    began = time.monotonic()

    steps = make_safe(fake_bench(wall, shutter=shutter, stages={"part mount": stage}), wall, is_success=True)

    assert time.monotonic() - began < 5.0
    assert shutter.states == [False]
    assert stage.stops == 1
    assert all(step.is_confirmed for step in steps)


def test_one_request_alone_lets_the_shutter_finish_its_way(wall: WallTimeline) -> None:
    wall.stop.request("SIGINT")
    began = time.monotonic()

    make_safe(fake_bench(wall, shutter=FakeShutter(wall, moves_in_s=0.1)), wall, is_success=True)

    assert time.monotonic() - began >= 0.1


def test_a_bench_with_nothing_to_make_safe_needs_no_step(timeline: VirtualTimeline) -> None:
    assert make_safe(fake_bench(timeline), timeline, is_success=True) == ()
