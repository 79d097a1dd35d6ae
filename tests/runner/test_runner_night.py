"""A whole night: what it records, one link for each address, the monitor, its duration, and the same bytes again."""

from pathlib import Path

import numpy as np
import pytest
from night_cases import (
    APART,
    BENCH,
    DARKS,
    HEAD,
    LADDERS,
    MONITOR,
    MOUNT,
    NIGHT,
    OVEN,
    RACK,
    STEPS,
    SWEEP_CURRENT,
    SWEEP_TEC,
    Wire,
    make_night,
    night,
)
from rehearsal_cases import Swallower, make_job

from rigctl.estimates import fit_run, run_data
from rigctl.files import load_recipe, load_rig, match, parse_rig
from rigctl.links.channel import Channel
from rigctl.plugins import find_bench_factory, find_drivers
from rigctl.record import load_run, verify_run
from rigctl.runner.bench import declared_capabilities
from rigctl.runner.forecast import Forecast
from rigctl.runner.progress import Silent
from rigctl.runner.rehearsal import rehearsal_job
from rigctl.runner.run import Job, run_job
from rigctl.runner.steady import STEADY
from rigctl.timeline import Timeline

RECIPES = Path(__file__).resolve().parents[2] / "recipes"
NO_MONITOR = BENCH.replace("  monitor: head 2\n", "")
NOISY_SOURCE = "simulated: {source noise: 1 %}\n"
LONG_DARKS = "dark: {by: shutter, before: true, after: true, every: 50 s}\n"


def test_a_whole_night_is_measured_recorded_and_closed(tmp_path: Path) -> None:
    outcome = run_job(make_night(tmp_path / "run.h5"))

    run = load_run(tmp_path / "run.h5")
    assert (outcome.status, outcome.exit_code, run.status) == ("complete", 0, "complete")
    assert [len(run.visits(step)) for step in ("empty", "plate")] == [3, 24]
    assert verify_run(tmp_path / "run.h5").is_whole
    assert {record["role"] for record in run.of_kind("identity")} == set(run.header.detectors) | {
        "part mount", "diode", "diode tec", "oven", "shutter", "part slide",
    }  # fmt: skip


def test_a_night_tells_the_truth_within_its_uncertainty(tmp_path: Path) -> None:
    run_job(make_night(tmp_path / "run.h5"))

    run = load_run(tmp_path / "run.h5")
    fitted = fit_run(run)
    assert fitted.refusals == ()
    offset = fitted.estimate("part.dial offset")
    assert offset is not None
    error = (offset.value - run.header.truth["part.dial offset"] + 45.0) % 90.0 - 45.0
    assert abs(error) < 5.0 * offset.u


@pytest.mark.parametrize(("rig", "racks"), [(BENCH, 1), (APART, 3)])
def test_one_link_serves_every_channel_behind_its_address(rig: str, racks: int, tmp_path: Path) -> None:
    wire = Wire()

    assert run_job(make_night(tmp_path / "run.h5", rig=rig, wire=wire)).exit_code == 0

    assert len(wire.opened) == len(set(wire.opened)) == 4 + racks
    assert {MOUNT, HEAD, MONITOR, RACK, OVEN} <= set(wire.opened)
    on_rack = {
        words for said in wire.said if said.address == RACK for words in ("SOURCE1", "(@4)") if words in said.text
    }
    assert on_rack == {"SOURCE1", "(@4)"}


def test_both_heads_read_at_once(tmp_path: Path) -> None:
    run_job(make_night(tmp_path / "run.h5"))

    for visit in load_run(tmp_path / "run.h5").visits("plate"):
        signal, monitor = visit.dwells["signal"], visit.dwells["monitor"]
        assert monitor.began_s == pytest.approx(signal.began_s, abs=0.01)


def test_a_monitor_takes_the_source_s_wander_out_of_the_signal(tmp_path: Path) -> None:
    """At one angle the signal scatters by what the source wanders; over the monitor's reading, by far less."""
    steps = "steps: [{name: still, sweep: [{part mount: {values: [0 deg]}}, {repeat: 60}]}]\n"
    run_job(make_night(tmp_path / "run.h5", night(steps), BENCH + NOISY_SOURCE))

    run = load_run(tmp_path / "run.h5")
    bare = [np.mean(visit.dwells["signal"].levels_w) for visit in run.visits("still")]
    freed = run_data(run).observed["signal"].power_w[:60]
    assert np.std(bare) / np.mean(bare) > 0.002
    assert np.std(freed) / np.mean(freed) < 0.25 * np.std(bare) / np.mean(bare)


def test_without_its_monitor_a_night_is_measured_by_the_signal_alone(tmp_path: Path) -> None:
    wire = Wire()

    assert run_job(make_night(tmp_path / "run.h5", rig=NO_MONITOR, wire=wire)).exit_code == 0

    run = load_run(tmp_path / "run.h5")
    assert MONITOR not in wire.opened
    assert run.header.detectors == ("signal",)
    assert run.header.monitor == ""
    assert fit_run(run).estimate("part.dial offset") is not None


@pytest.mark.parametrize("steps", [STEPS, SWEEP_TEC, SWEEP_CURRENT, LADDERS])
def test_one_seed_gives_the_same_bytes(steps: str, tmp_path: Path) -> None:
    for name in ("a", "b"):
        (tmp_path / name).mkdir()
        assert run_job(make_night(tmp_path / name / "run.h5", night(steps), seed=5)).exit_code == 0

    first, second = ((tmp_path / name / "run.h5").read_bytes() for name in ("a", "b"))
    assert first == second


def test_another_seed_gives_other_readings(tmp_path: Path) -> None:
    for seed in (1, 2):
        run_job(make_night(tmp_path / f"{seed}.h5", seed=seed))

    first, second = (load_run(tmp_path / f"{seed}.h5").visits("plate") for seed in (1, 2))
    assert first[0].dwells["signal"].levels_w != second[0].dwells["signal"].levels_w


def settling_s(job: Job) -> float:
    """How long temperatures were waited for, from the looks at them in the run file: a gap ends a wait."""
    looks = [look["t"] for look in load_run(job.path).of_kind("reading")]
    gaps = np.diff(looks)
    return float(gaps[gaps < 1.5].sum())


def steady_s(job: Job) -> float:
    """What the forecast takes for temperatures: moves at the declared rate, and the time they must be steady."""
    forecast = Forecast(job.recipe, declared_capabilities(job.recipe, job.rig, job.drivers))
    still = {role: able for role, able in forecast.capabilities.items() if "tec" not in role and role != "oven"}
    return forecast.duration_s() - Forecast(job.recipe, still).duration_s()


@pytest.mark.parametrize(
    ("recipe", "rig"),
    [
        (night(SWEEP_CURRENT), BENCH),
        (night(SWEEP_CURRENT, darks=LONG_DARKS), BENCH),
        (night("steps: [{name: turn, sweep: [{part mount: {turn: 3, step: 10 deg}}]}]\n"), BENCH),
        (night("steps: [{name: turn, sweep: [{part mount: {turn: 3, step: 10 deg}}]}]\n", darks=LONG_DARKS), BENCH),
        (NIGHT, BENCH),
        (night(darks=""), APART),
    ],
)
def test_the_duration_told_beforehand_is_that_of_the_night_temperatures_aside(
    recipe: str, rig: str, tmp_path: Path
) -> None:
    job = make_night(tmp_path / "run.h5", recipe, rig)

    assert run_job(job).exit_code == 0

    told_s = Forecast(job.recipe, declared_capabilities(job.recipe, job.rig, job.drivers)).duration_s()
    took_s = job.timeline.now() - settling_s(job)
    assert told_s - steady_s(job) == pytest.approx(took_s, rel=0.04)


def test_a_temperature_s_part_of_the_forecast_is_its_way_and_the_time_it_must_be_steady(tmp_path: Path) -> None:
    job = make_night(tmp_path / "run.h5", night("steps: [{name: still, sweep: [{part mount: {values: [0 deg]}}]}]\n"))

    # from 22 to 24 degC at 0.05 K/s and 20 s steady; the oven from 22 to 23 degC, and steady as when nobody says
    assert steady_s(job) == pytest.approx((2.0 / 0.05 + 20.0) + (1.0 / 0.05 + STEADY.for_s), abs=1.0)


@pytest.mark.parametrize("name", sorted(path.name for path in RECIPES.glob("*.yaml")))
def test_every_ready_recipe_rehearses_on_the_whole_bench_with_the_source_off_at_the_end(
    name: str, tmp_path: Path
) -> None:
    drivers, factory = find_drivers(), find_bench_factory()
    recipe = load_recipe(RECIPES / name)
    rig = load_rig(RECIPES / "rigs" / "long-bench.yaml", drivers, factory)
    match(recipe, rig, drivers)
    job = rehearsal_job(
        recipe, rig, drivers=drivers, factory=factory, seed=3, path=tmp_path / "run.h5", progress=Silent()
    )

    outcome = run_job(job)

    assert (outcome.status, outcome.exit_code, outcome.why) == ("complete", 0, "")
    assert all(step.is_confirmed for step in outcome.safe_steps)
    assert verify_run(tmp_path / "run.h5").is_whole


def test_a_night_on_the_bench_that_nobody_wrote_a_rig_for(tmp_path: Path) -> None:
    job = make_night(tmp_path / "never.h5", night(darks=DARKS))
    drivers, factory = find_drivers(), find_bench_factory()
    text = factory.default_rig({name: role.kind for name, role in job.recipe.roles.items()})
    rig = parse_rig(text, "the default rig", drivers, factory)

    outcome = run_job(
        rehearsal_job(
            job.recipe, rig, drivers=drivers, factory=factory, seed=1, path=tmp_path / "run.h5", progress=Silent()
        )
    )

    assert (outcome.status, outcome.exit_code) == ("complete", 0)


def test_a_lost_command_amid_a_night_costs_an_attempt_and_the_source_stays_on(tmp_path: Path) -> None:
    """A reply of the monitor is lost once: the visit is repeated at the same current."""
    made: list[Swallower] = []

    def wrap(channel: Channel, _timeline: Timeline) -> Channel:
        if channel.address != MONITOR:
            return channel
        made.append(Swallower(channel, at=b"FETCH?", nth=40, count=1))
        return made[-1]

    outcome = run_job(make_job(tmp_path / "run.h5", recipe=NIGHT, rig=BENCH, wrap=wrap))

    assert [channel.fired for channel in made] == [1]
    run = load_run(tmp_path / "run.h5")
    assert (outcome.status, outcome.exit_code) == ("complete", 0)
    assert [attempt.status for attempt in run.attempts].count("failed") == 1
    assert len(run.visits("plate")) == 24
