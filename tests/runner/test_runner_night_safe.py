"""Making a whole bench safe: what is lost meanwhile keeps nothing else from it, and only a source left on is exit 7."""

import time
from collections.abc import Iterator
from dataclasses import replace
from datetime import UTC, datetime
from pathlib import Path

import pytest
from night_cases import (
    APART,
    BENCH,
    DARKS,
    HEAD,
    MONITOR,
    MOUNT,
    NIGHT,
    OVEN,
    RACK,
    SHUTTER,
    TEC,
    Phases,
    Said,
    Wire,
    emits,
    make_night,
    night,
)
from runner_cases import FakeStage, fake_bench
from test_runner_limits import LIMITS, Source

from rigctl.errors import StopRequestedError
from rigctl.record import load_run
from rigctl.runner.limits import LimitedSource
from rigctl.runner.run import Job, Outcome, run_job
from rigctl.runner.safe import SafeStep, is_beam_off, make_safe
from rigctl.timeline import VirtualTimeline, WallTimeline

ALL_SAFE = [("shutter", "closed"), ("diode", "off"), ("part mount", "stopped"), ("oven", "not regulating")]
NO_BACKGROUND = night(darks="dark: {by: shutter, before: true, after: true}\n")


def run_losing(path: Path, address: str, *, comes_back: bool = False) -> tuple[Job, Outcome]:
    """Run a night that loses an instrument at the moment it is made safe, for good or until it is opened anew."""
    phases = Phases()

    def is_lost(said: Said) -> bool:
        is_over = "making safe" in phases.names and said.address == address
        return is_over and not (comes_back and wire.opened.count(address) > 1)

    wire = Wire(cut=is_lost)
    job = make_night(path, NO_BACKGROUND, APART, wire=wire, phases=phases)
    return job, run_job(job)


def test_a_night_that_went_well_ends_with_everything_in_its_safe_state_in_order(tmp_path: Path) -> None:
    job = make_night(tmp_path / "run.h5", NO_BACKGROUND)

    outcome = run_job(job)

    assert [(step.role, step.wanted) for step in outcome.safe_steps] == ALL_SAFE
    assert all(step.is_confirmed for step in outcome.safe_steps)
    assert not emits(job)
    texts = [event["text"] for event in load_run(tmp_path / "run.h5").of_kind("event")]
    assert texts[-4:] == [f"'{role}' {wanted}" for role, wanted in ALL_SAFE]


@pytest.mark.parametrize(
    ("address", "roles"),
    [(SHUTTER, {"shutter"}), (MOUNT, {"part mount"}), (OVEN, {"oven"}), (TEC, set()), (HEAD, set()), (MONITOR, set())],
)
def test_an_instrument_lost_meanwhile_keeps_nothing_else_from_being_made_safe(
    address: str, roles: set[str], tmp_path: Path
) -> None:
    job, outcome = run_losing(tmp_path / "run.h5", address)

    assert {step.role for step in outcome.safe_steps if not step.is_confirmed} == roles
    assert len(outcome.safe_steps) == len(ALL_SAFE)
    assert not emits(job)
    # with the source read back off no light can leave, whatever else is unknown
    assert (outcome.status, outcome.exit_code) == ("complete", 0)
    levels = {
        e["level"] for e in load_run(tmp_path / "run.h5").of_kind("event") if "could not be confirmed" in e["text"]
    }
    assert levels == ({"error"} if roles else set())


def test_a_source_that_cannot_be_confirmed_off_is_exit_code_7_after_everything_else_was_done(tmp_path: Path) -> None:
    job, outcome = run_losing(tmp_path / "run.h5", RACK)

    assert outcome.exit_code == 7
    assert {step.role for step in outcome.safe_steps if not step.is_confirmed} == {"diode"}
    assert emits(job)
    assert load_run(tmp_path / "run.h5").of_kind("end")[-1]["code"] == 7


def test_a_source_whose_wire_is_lost_is_switched_off_once_the_link_was_opened_anew(tmp_path: Path) -> None:
    job, outcome = run_losing(tmp_path / "run.h5", RACK, comes_back=True)

    assert outcome.exit_code == 0
    assert all(step.is_confirmed for step in outcome.safe_steps)
    assert not emits(job)


def test_a_run_that_failed_and_could_not_be_made_safe_tells_the_danger_by_its_exit_code(tmp_path: Path) -> None:
    """The rack with source, controller and shutter is gone in the middle of the sweep, for good."""
    phases = Phases()
    job = make_night(
        tmp_path / "run.h5",
        wire=Wire(cut=lambda said: said.address == RACK and said.at_s > 250.0),
        phases=phases,
    )

    outcome = run_job(job)

    assert (outcome.status, outcome.exit_code) == ("failed", 7)
    assert "the connection is gone" in outcome.why
    assert {step.role for step in outcome.safe_steps if step.is_confirmed} == {"part mount", "oven"}
    run = load_run(tmp_path / "run.h5")
    assert run.status == "failed"
    assert run.visits("empty")


def test_a_source_lost_before_it_ever_emitted_is_no_danger(tmp_path: Path) -> None:
    wire = Wire(cut=lambda said: said.address == RACK and "TEMPERATURE" in said.text)

    outcome = run_job(make_night(tmp_path / "run.h5", NIGHT.replace(DARKS, ""), wire=wire))

    assert (outcome.status, outcome.exit_code) == ("failed", 3)


@pytest.mark.parametrize("phase", ["preparing 'diode tec'", "preparing 'diode'", "step 'empty'", "step 'plate'"])
def test_a_stop_in_any_phase_ends_with_exit_code_6_and_the_source_off_at_once(phase: str, tmp_path: Path) -> None:
    jobs: list[Job] = []
    wire = Wire()
    phases = Phases({phase: lambda: jobs[0].timeline.stop.request("SIGTERM")})
    jobs.append(make_night(tmp_path / "run.h5", wire=wire, phases=phases))

    outcome = run_job(jobs[0])

    assert (outcome.status, outcome.exit_code) == ("stopped", 6)
    assert all(step.is_confirmed for step in outcome.safe_steps)
    assert not emits(jobs[0])
    assert phases.names[-1] == "making safe"
    # no ramp: behind the last current that flowed only zero was sent, and that soon
    flowing = [at_s for at_s, value in wire.currents() if value > 0.0]
    assert all(value == 0.0 for at_s, value in wire.currents() if flowing and at_s > flowing[-1])


def test_a_controller_that_cools_the_diode_goes_on_and_others_end_unless_the_rig_says_otherwise(tmp_path: Path) -> None:
    wire = Wire()
    rig = BENCH + "on stop: {diode tec: switch off, oven: keep regulating}\n"

    outcome = run_job(make_night(tmp_path / "run.h5", rig=rig, wire=wire))

    assert [step.role for step in outcome.safe_steps if step.wanted == "not regulating"] == ["diode tec"]
    assert wire.when("OUTPUT2:STATE OFF")
    assert not wire.when("OUTPUT5:STATE OFF")
    # the diode must be dark before its cooler lets go
    assert wire.when("OUTPUT1:STATE OFF")[-1] < wire.when("OUTPUT2:STATE OFF")[0]


@pytest.fixture
def wall() -> Iterator[WallTimeline]:
    line = WallTimeline()
    yield line
    line.stop.close()


@pytest.fixture
def timeline() -> Iterator[VirtualTimeline]:
    line = VirtualTimeline(datetime(2026, 1, 5, tzinfo=UTC))
    yield line
    line.stop.close()


def emitting(source: Source, current_a: float) -> LimitedSource:
    limited = LimitedSource(source, LIMITS, "diode")
    limited.switch_on()
    limited.set_current(current_a)
    source.log.clear()
    return limited


def test_a_second_request_skips_the_waits_of_the_ramp_but_neither_its_end_nor_the_off_command(
    wall: WallTimeline,
) -> None:
    """40 mA at 5 mA/s would take 8 s."""
    source, stage = Source(), FakeStage(wall)
    bench = fake_bench(wall, sources={"diode": emitting(source, 0.04)}, stages={"part mount": stage})
    wall.stop.request("SIGINT")
    wall.stop.request("SIGINT")
    began = time.monotonic()

    steps = make_safe(bench, wall, is_success=True)

    assert time.monotonic() - began < 2.0
    assert [step.is_confirmed for step in steps] == [True, True]
    assert ("output", 0.0) in source.log
    assert next(value for name, value in reversed(source.log) if name == "current") == 0.0
    assert stage.stops == 1


def test_one_request_alone_lets_the_ramp_go_down_in_its_time(timeline: VirtualTimeline) -> None:
    source = Source()
    bench = fake_bench(timeline, sources={"diode": emitting(source, 0.04)})
    timeline.stop.request("SIGINT")

    (step,) = make_safe(bench, timeline, is_success=True)

    assert step.is_confirmed
    assert timeline.now() == pytest.approx(8.0, abs=0.2)
    with pytest.raises(StopRequestedError):
        timeline.stop.check()


def test_after_a_failure_the_output_goes_off_first_and_no_time_passes(timeline: VirtualTimeline) -> None:
    source = Source()
    bench = fake_bench(timeline, sources={"diode": emitting(source, 0.04)})

    make_safe(bench, timeline, is_success=False)

    assert timeline.now() == 0.0
    assert source.log == [("output", 0.0), ("current", 0.0)]


def test_a_ramp_that_breaks_on_its_way_down_still_ends_with_the_output_off(timeline: VirtualTimeline) -> None:
    class Breaking(Source):
        def set_current(self, current_a: float) -> float:
            if 0.0 < current_a < 0.02:
                raise ZeroDivisionError("a bug")
            return super().set_current(current_a)

    source = Breaking()
    bench = fake_bench(timeline, sources={"diode": emitting(source, 0.04)})

    (step,) = make_safe(bench, timeline, is_success=True)

    assert source.log[-2:] == [("output", 0.0), ("current", 0.0)]
    assert step.is_confirmed


def test_a_source_that_reads_back_on_is_not_confirmed_off(timeline: VirtualTimeline) -> None:
    class Stuck(Source):
        def set_output(self, is_on: bool) -> bool:
            super().set_output(is_on)
            return True

    source = Stuck()
    bench = fake_bench(timeline, sources={"diode": emitting(source, 0.04)})

    (step,) = make_safe(bench, timeline, is_success=False)

    assert source.log.count(("output", 0.0)) == 2
    assert "reads back on" in step.trouble
    assert not is_beam_off((step,))


def test_a_closed_shutter_does_not_stand_in_for_a_source_that_may_be_on() -> None:
    closed, lost = SafeStep("shutter", "closed"), SafeStep("diode", "off", "no reply")

    assert not is_beam_off((closed, lost))
    assert is_beam_off((replace(closed, trouble="no reply"), replace(lost, trouble="")))
