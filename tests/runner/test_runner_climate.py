"""Temperatures and currents in whole runs: their order on the wire, ramps up and down."""

import itertools
from pathlib import Path

import pytest
from night_cases import (
    BENCH,
    DARKS,
    DIODE,
    DIODE_TEC,
    LADDERS,
    NIGHT,
    RACK,
    SWEEP_CURRENT,
    SWEEP_TEC,
    Wire,
    between,
    emits,
    make_night,
    night,
)

from rigctl.record import load_run
from rigctl.runner.driving import RAMP_A_PER_S, STEP_S
from rigctl.runner.run import Outcome, run_job

LIMIT_A = 0.045
RESOLUTION_A = 10e-6


def run_night(path: Path, recipe: str = NIGHT, rig: str = BENCH, *, wire: Wire | None = None) -> Outcome:
    return run_job(make_night(path, recipe, rig, wire=wire))


def steps_of(currents: list[tuple[float, float]]) -> list[float]:
    """Changes from one current that was sent to the next, A."""
    values = [value for _, value in currents]
    return [b - a for a, b in itertools.pairwise(values)]


def test_limits_go_out_before_any_setpoint_and_the_temperature_before_the_current(tmp_path: Path) -> None:
    wire = Wire()

    assert run_night(tmp_path / "run.h5", wire=wire).exit_code == 0

    limits = wire.when("SOURCE1:CURRENT:LIMIT:AMPLITUDE 0.045") + wire.when("SOURCE1:VOLTAGE:PROTECTION:LEVEL 2.5")
    limits += wire.when("SOURCE2:TEMPERATURE:LIMIT:LOW 10") + wire.when("SOURCE2:TEMPERATURE:LIMIT:HIGH 40")
    assert len(limits) == 4
    (set_s, to_c), *_ = wire.temperatures()
    regulates_s, switched_on_s = wire.when("OUTPUT2:STATE ON")[0], wire.when("OUTPUT1:STATE ON")[0]
    flows_s = next(at_s for at_s, current_a in wire.currents() if current_a > 0.0)
    assert to_c == 24.0
    assert max(limits) < set_s < regulates_s < switched_on_s < flows_s


def test_the_diode_waits_until_its_temperature_has_been_steady_for_as_long_as_asked(tmp_path: Path) -> None:
    wire = Wire()

    run_night(tmp_path / "run.h5", wire=wire)

    looks = load_run(tmp_path / "run.h5").of_kind("reading")
    own = [(look["t"], look["values"]["temperature_c"]) for look in looks if look["role"] == "diode tec"]
    near = [at_s for at_s, value_c in own if abs(value_c - 24.0) <= 0.02]
    (on_s,) = wire.when("OUTPUT1:STATE ON")
    assert own[0][1] == pytest.approx(22.0, abs=0.1)
    assert near[-1] - near[0] >= 20.0
    assert own[-1][0] <= on_s


def test_the_output_goes_on_at_zero_current(tmp_path: Path) -> None:
    wire = Wire()

    run_night(tmp_path / "run.h5", wire=wire)

    (on_s,) = wire.when("OUTPUT1:STATE ON")
    assert {value for at_s, value in wire.currents() if at_s <= on_s} == {0.0}


def test_every_current_that_is_sent_is_within_the_limit(tmp_path: Path) -> None:
    wire = Wire()

    run_night(tmp_path / "run.h5", night(SWEEP_CURRENT), wire=wire)

    values = [value for _, value in wire.currents()]
    assert max(values) == pytest.approx(0.040)
    assert all(0.0 <= value <= LIMIT_A for value in values)


@pytest.mark.parametrize("darks", ["", DARKS], ids=["at the end", "for a background"])
def test_the_current_goes_up_and_on_success_down_by_ramps(darks: str, tmp_path: Path) -> None:
    wire = Wire()

    run_night(tmp_path / "run.h5", night(darks=darks), wire=wire)

    steps = steps_of(wire.currents())
    rising, falling = [s for s in steps if s > 0.0], [s for s in steps if s < 0.0]
    largest_a = RAMP_A_PER_S * STEP_S + RESOLUTION_A
    assert max(rising) <= largest_a
    assert max(-step for step in falling) <= largest_a
    assert sum(rising) == pytest.approx(0.034)
    assert sum(falling) == pytest.approx(-0.034)
    assert list(between(wire.currents(), 0.0, wire.when("OUTPUT1:STATE OFF")[-1]))[-1] == 0.0


def test_a_source_that_somebody_left_on_is_switched_off_before_anything_else_is_set(tmp_path: Path) -> None:
    wire = Wire()
    job = make_night(tmp_path / "run.h5", wire=wire)
    channel = job.open_channel(RACK, job.drivers["scpi-current-source"].family.opening)
    channel.write(b"SOURCE1:CURRENT:LEVEL:IMMEDIATE:AMPLITUDE 0.02;:OUTPUT1:STATE ON\n", 1.0)
    channel.close()
    job.timeline.wait_until(1.0)
    was_on = emits(job)
    wire.said.clear()

    assert run_job(job).exit_code == 0

    assert was_on
    off_s = wire.when("OUTPUT1:STATE OFF")[0]
    assert off_s < wire.temperatures()[0][0]


@pytest.mark.parametrize("steps", [SWEEP_TEC, LADDERS])
def test_the_diode_s_temperature_moves_at_zero_current_also_in_a_sweep(steps: str, tmp_path: Path) -> None:
    wire = Wire()

    assert run_night(tmp_path / "run.h5", night(steps), wire=wire).exit_code == 0

    moves = [at_s for at_s, _ in wire.temperatures()]
    assert [value for _, value in wire.temperatures()] == [24.0, 20.0]
    for at_s in moves:
        before = [value for when_s, value in wire.currents() if when_s <= at_s]
        assert before[-1] == 0.0


def test_after_its_temperature_moved_the_diode_gets_the_current_of_its_preparation_back(tmp_path: Path) -> None:
    """The sweep does not set the current: every visit is measured at the 34 mA that were prepared."""
    assert run_night(tmp_path / "run.h5", night(SWEEP_TEC)).exit_code == 0

    visits = load_run(tmp_path / "run.h5").visits("colours")
    assert [visit.asked["diode tec"] for visit in visits] == [24.0, 24.0, 20.0, 20.0]
    assert [visit.conditions["diode"]["current_a"] for visit in visits] == [pytest.approx(0.034)] * 4
    for visit in visits:
        assert visit.read["diode tec"] == pytest.approx(visit.asked["diode tec"], abs=0.05)


def test_a_temperature_that_is_prepared_after_the_current_leaves_the_current_where_it_was(tmp_path: Path) -> None:
    recipe = NIGHT.replace(f"  - {DIODE_TEC}\n  - {DIODE}\n", f"  - {DIODE}\n  - {DIODE_TEC}\n")
    wire = Wire()

    assert run_night(tmp_path / "run.h5", recipe, wire=wire).exit_code == 0

    (set_s, _), *_ = wire.temperatures()
    assert list(between(wire.currents(), 0.0, set_s))[-1] == 0.0
    visits = load_run(tmp_path / "run.h5").visits("plate")
    assert {round(visit.conditions["diode"]["current_a"], 6) for visit in visits} == {0.034}


def test_a_sweep_of_current_and_temperature_records_what_was_read_of_both(tmp_path: Path) -> None:
    run_night(tmp_path / "run.h5", night(LADDERS))

    visits = load_run(tmp_path / "run.h5").visits("ladders")
    assert [(visit.asked["diode tec"], visit.asked["diode"]) for visit in visits] == [
        (24.0, 0.01),
        (24.0, 0.03),
        (20.0, 0.01),
        (20.0, 0.03),
    ]
    for visit in visits:
        assert visit.read["diode"] == pytest.approx(visit.asked["diode"], abs=RESOLUTION_A)
        assert visit.conditions["diode"]["voltage_v"] == pytest.approx(1.5 + 5.0 * visit.asked["diode"], abs=1e-3)
        assert visit.conditions["diode tec"]["resistance_ohm"] > 0.0


def test_every_visit_keeps_what_source_and_controllers_said(tmp_path: Path) -> None:
    run_night(tmp_path / "run.h5")

    run = load_run(tmp_path / "run.h5")
    for step in ("empty", "plate"):
        for visit in run.visits(step):
            assert visit.conditions.keys() == {"diode", "diode tec", "oven"}
            assert visit.conditions["diode tec"]["temperature_c"] == pytest.approx(24.0, abs=0.02)
