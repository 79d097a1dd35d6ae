"""Single visits: the way to an angle as it goes over the wire, settling, ranges."""

from collections.abc import Iterator
from datetime import UTC, datetime
from pathlib import Path

import pytest
from rehearsal_cases import RECIPE, RIG, make_job
from runner_cases import (
    SLOW_WHEN_SENSITIVE,
    TWO_AXES,
    TWO_CONTROLLERS,
    TWO_MOUNTS,
    TWO_STEPS,
    Ear,
    FakeMeter,
    FakeShutter,
    FakeStage,
    fake_bench,
    visiting_on,
)

from rigctl.files import parse_recipe
from rigctl.interfaces import Flag
from rigctl.record import load_run
from rigctl.runner.bench import OpenBench
from rigctl.runner.plan import step_visits
from rigctl.runner.run import run_job
from rigctl.runner.visiting import is_overloaded
from rigctl.timeline import VirtualTimeline

PLAIN = parse_recipe(RECIPE, "recipe.yaml")


@pytest.fixture
def timeline() -> Iterator[VirtualTimeline]:
    line = VirtualTimeline(datetime(2026, 1, 5, tzinfo=UTC))
    yield line
    line.stop.close()


def whole_bench(timeline: VirtualTimeline) -> OpenBench:
    """A shutter, a mount and a meter without a wire."""
    return fake_bench(
        timeline,
        shutter=FakeShutter(timeline),
        stages={"part mount": FakeStage(timeline)},
        meters={"signal": FakeMeter(timeline)},
    )


def moves(path: Path, recipe: str, rig: str = RIG, letter: str = "A") -> list[float]:
    ear = Ear()
    assert run_job(make_job(path, recipe=recipe, rig=rig, wrap=ear)).exit_code == 0
    return ear.moves(letter)


def test_the_first_visit_goes_past_its_angle_and_every_later_one_goes_straight_up(tmp_path: Path) -> None:
    assert moves(tmp_path / "run.h5", RECIPE) == [-0.2, *(30.0 * n for n in range(12))]


def test_an_approach_from_either_side_never_goes_past_the_angle(tmp_path: Path) -> None:
    recipe = RECIPE.replace("from below", "either")

    assert moves(tmp_path / "run.h5", recipe) == [30.0 * n for n in range(12)]


def test_a_mount_without_backlash_needs_no_detour(tmp_path: Path) -> None:
    rig = RIG.replace("5001}", "5001, backlash: 0 deg}")

    assert moves(tmp_path / "run.h5", RECIPE, rig) == [30.0 * n for n in range(12)]


def test_a_step_with_another_approach_takes_the_play_out_anew(tmp_path: Path) -> None:
    """The last angle of the first step is the first of the second, but it was reached from the other side."""
    assert moves(tmp_path / "run.h5", TWO_STEPS)[12:] == [330.0, 330.2, 330.0, 200.0, 20.0]


def test_a_mount_that_is_to_stay_is_not_told_to_move(tmp_path: Path) -> None:
    assert moves(tmp_path / "run.h5", TWO_MOUNTS, TWO_AXES, "A") == [0.0, 45.0, 90.0]


def test_a_fast_axis_goes_back_to_its_start_for_each_value_of_the_slow_one(tmp_path: Path) -> None:
    assert moves(tmp_path / "run.h5", TWO_MOUNTS, TWO_AXES, "B") == [10.0, 50.0] * 3


def test_mounts_turn_together(tmp_path: Path) -> None:
    """Both mounts turn for the third visit: both are told before either is waited for."""
    ear = Ear()
    run_job(make_job(tmp_path / "run.h5", recipe=TWO_MOUNTS, rig=TWO_CONTROLLERS, wrap=ear))

    both = [b"G90 G53 G0 A45.000\n", b"G90 G53 G0 B10.000\n"]
    first = ear.heard.index(both[0])
    assert [line for line in ear.heard[first : first + 4] if b"G0" in line] == both


def test_the_angle_that_is_recorded_is_the_one_that_was_read_back(tmp_path: Path) -> None:
    rig = RIG.replace("5001}", "5001, resolution: 0.7 deg}")

    run_job(make_job(tmp_path / "run.h5", rig=rig))

    visit = load_run(tmp_path / "run.h5").visits("data")[1]
    assert visit.asked["part mount"] == 30.0
    assert visit.read["part mount"] != 30.0
    assert visit.read["part mount"] == pytest.approx(30.0, abs=0.7)


def test_a_range_is_the_smallest_that_holds_the_power_and_never_beyond_the_largest(timeline: VirtualTimeline) -> None:
    visiting = visiting_on(whole_bench(timeline), timeline)

    assert visiting.use_range("signal", 3e-6) == 2e-5
    assert visiting.use_range("signal", 1.0) == 2e-4


def test_a_range_is_raised_one_by_one_until_there_is_no_larger(timeline: VirtualTimeline) -> None:
    meter = FakeMeter(timeline)
    visiting = visiting_on(fake_bench(timeline, meters={"signal": meter}), timeline)
    visiting.use_range("signal", 1e-6)

    steps = [(visiting.raise_range("signal"), meter.range_w) for _ in range(3)]

    assert steps == [(True, 2e-5), (True, 2e-4), (False, 2e-4)]


@pytest.mark.parametrize(("power_w", "time_constant_s"), [(1e-6, 0.5), (1e-5, 0.05), (1e-4, 0.005)])
def test_settling_follows_the_time_constant_of_the_range_in_use(
    power_w: float, time_constant_s: float, timeline: VirtualTimeline
) -> None:
    visiting = visiting_on(whole_bench(timeline), timeline)
    visiting.use_range("signal", power_w)
    (step,) = PLAIN.steps
    visit = next(step_visits(step))

    record = visiting.take(visit, step)

    # the mount and the meter take no time here: what is left is the settling, 150 ms at least
    expected_s = max(0.15, 9.21034 * time_constant_s)
    assert record["t_end"] - record["t_begin"] == pytest.approx(expected_s, rel=1e-5)


def test_the_slowest_of_several_meters_decides(timeline: VirtualTimeline) -> None:
    bench = fake_bench(
        timeline,
        stages={"part mount": FakeStage(timeline)},
        meters={"signal": FakeMeter(timeline), "monitor": FakeMeter(timeline)},
    )
    visiting = visiting_on(bench, timeline)
    visiting.use_range("signal", SLOW_WHEN_SENSITIVE.ranges_w[2])
    visiting.use_range("monitor", SLOW_WHEN_SENSITIVE.ranges_w[0])
    (step,) = PLAIN.steps

    visiting.take(next(step_visits(step)), step)

    assert timeline.now() == pytest.approx(9.21034 * 0.5, rel=1e-5)


def test_positions_that_are_not_trusted_are_approached_anew(timeline: VirtualTimeline) -> None:
    stage = FakeStage(timeline)
    bench = fake_bench(timeline, stages={"part mount": stage}, meters={"signal": FakeMeter(timeline)})
    visiting = visiting_on(bench, timeline)
    visiting.use_range("signal", 1e-4)
    (step,) = PLAIN.steps
    visit = next(step_visits(step))

    visiting.take(visit, step)
    visiting.take(visit, step)
    visiting.forget_positions()
    visiting.take(visit, step)

    assert stage.asked_deg == [-0.2, 0.0, -0.2, 0.0]


def test_an_overload_is_found_among_other_flags() -> None:
    flags = {"a": Flag.OVERLOAD | Flag.QUESTIONABLE, "b": Flag.QUESTIONABLE, "c": Flag(0)}

    assert is_overloaded({"detectors": {role: {"flags": int(flag)} for role, flag in flags.items()}}) == ["a"]


def test_on_the_largest_range_an_overloaded_visit_is_kept_as_saturated_and_not_repeated(tmp_path: Path) -> None:
    rig = RIG + "simulated: {power: 60 mW}\n"

    outcome = run_job(make_job(tmp_path / "run.h5", recipe=RECIPE.replace("2 mW +- 20 %", "30 mW"), rig=rig))

    run = load_run(tmp_path / "run.h5")
    saturated = [visit for visit in run.attempts if visit.status == "saturated"]
    assert outcome.exit_code == 0
    assert saturated
    assert {visit.attempt for visit in saturated} == {1}
    assert any("has no larger range" in event["text"] for event in run.of_kind("event"))
