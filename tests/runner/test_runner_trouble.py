"""What ends a night amid its work: interlocks, trips, compliance, sensors, and temperatures that never settle."""

from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest
from night_cases import BENCH, NIGHT, STEPS, SWEEP_CURRENT, Phases, Wire, between, emits, make_night, night

from rigctl.interfaces import Driver, Instrument, Options, SourceConditions
from rigctl.links.link import Link
from rigctl.plugins import find_drivers
from rigctl.record import load_run, verify_run
from rigctl.runner.run import Outcome, run_job


def ended(path: Path, recipe: str, rig: str, *, drivers: dict[str, Driver] | None = None) -> tuple[Outcome, Wire]:
    """Run a night that is to fail amid a sweep; check what every failure has in common."""
    wire, phases = Wire(), Phases()
    job = make_night(path, recipe, rig, wire=wire, drivers=drivers, phases=phases)

    outcome = run_job(job)

    run = load_run(path)
    assert (outcome.status, outcome.exit_code, run.status) == ("failed", 3, "failed")
    assert all(step.is_confirmed for step in outcome.safe_steps)
    assert not emits(job)
    assert verify_run(path).is_whole
    assert any(event["text"] == "'diode' off" for event in run.of_kind("event"))
    return outcome, wire


def assert_off_at_once(wire: Wire) -> None:
    """After the last visit the output went off without another step of current, and zero was set behind it."""
    off_s = wire.when("OUTPUT1:STATE OFF")[-1]
    measured_s = max(at_s for at_s in wire.when("MEASURE") if at_s < off_s)
    assert off_s - measured_s < 0.1
    assert set(between(wire.currents(), measured_s, off_s + 10.0)) == {0.0}
    assert min(at_s for at_s, _ in wire.currents() if at_s >= measured_s) >= off_s


def test_an_interlock_that_opens_in_a_sweep_ends_the_run_with_the_source_off(tmp_path: Path) -> None:
    rig = BENCH + "simulated: {source 1: {interlock opens after: 250 s}}\n"

    outcome, wire = ended(tmp_path / "run.h5", NIGHT, rig)

    assert "its interlock is open" in outcome.why
    assert outcome.why.startswith("diode")
    assert 0 < len(load_run(tmp_path / "run.h5").visits("plate")) < 24
    assert_off_at_once(wire)


def test_an_interlock_that_is_open_at_the_start_keeps_the_output_from_going_on(tmp_path: Path) -> None:
    rig = BENCH + "simulated: {source 1: {interlock opens after: 1 s}}\n"

    outcome, wire = ended(tmp_path / "run.h5", NIGHT, rig)

    assert "its interlock is open" in outcome.why
    assert wire.when("OUTPUT1:STATE ON") == []


def test_a_protection_that_trips_in_a_sweep_ends_the_run_with_the_source_off(tmp_path: Path) -> None:
    """Of 1.5 V and 50 ohm, 2.5 V leave 20 mA: the step to 25 mA trips it."""
    rig = BENCH + "simulated: {source 1: {series resistance: 50 ohm}}\n"

    outcome, _ = ended(tmp_path / "run.h5", night(SWEEP_CURRENT).replace("to: 34 mA", "to: 10 mA"), rig)

    assert "its protection has tripped" in outcome.why
    visits = load_run(tmp_path / "run.h5").visits("ladder")
    assert [visit.asked["diode"] for visit in visits] == pytest.approx([0.0, 0.005, 0.01, 0.015, 0.02])


def test_a_protection_that_trips_on_the_way_up_is_seen_before_the_warm_up_is_waited_for(tmp_path: Path) -> None:
    recipe = NIGHT.replace("warm-up: 1 min", "warm-up: 60 min")
    rig = BENCH + "simulated: {source 1: {series resistance: 50 ohm}}\n"

    _, wire = ended(tmp_path / "run.h5", recipe, rig)

    assert wire.said[-1].at_s < 600.0


class AtCompliance:
    """A source that says from some look on that it is at its compliance; everything else is the real driver's."""

    def __init__(self, real: Any, *, after: int) -> None:
        self._real, self._left = real, after

    def __getattr__(self, name: str) -> Any:
        return getattr(self._real, name)

    def conditions(self) -> SourceConditions:
        self._left -= 1
        seen: SourceConditions = self._real.conditions()
        return seen if self._left > 0 else replace(seen, is_at_compliance=True)


def test_a_source_at_its_compliance_ends_the_run_with_the_source_off(tmp_path: Path) -> None:
    drivers: dict[str, Driver] = dict(find_drivers())
    real = drivers["scpi-current-source"]

    def open_source(link: Link, options: Options) -> Instrument:
        source: Any = AtCompliance(real.open(link, options), after=6)
        return source  # type: ignore[no-any-return]

    drivers["scpi-current-source"] = replace(real, open=open_source)

    outcome, wire = ended(tmp_path / "run.h5", NIGHT, BENCH, drivers=drivers)

    assert "at its compliance voltage" in outcome.why
    assert len(load_run(tmp_path / "run.h5").visits("empty")) == 3
    assert_off_at_once(wire)


@pytest.mark.parametrize(("tec", "role"), [("tec 1", "channel 2"), ("oven 1", "channel 5")])
def test_a_thermistor_that_breaks_in_a_sweep_ends_the_run_with_the_source_off(
    tec: str, role: str, tmp_path: Path
) -> None:
    rig = BENCH + f"simulated: {{{tec}: {{sensor breaks after: 250 s}}}}\n"

    outcome, wire = ended(tmp_path / "run.h5", NIGHT, rig)

    assert role in outcome.why
    assert "open" in outcome.why
    assert load_run(tmp_path / "run.h5").visits("empty")
    assert_off_at_once(wire)


def test_a_temperature_that_does_not_become_steady_is_given_up_and_ends_the_run(tmp_path: Path) -> None:
    steps = STEPS.replace("give up after: 20 min", "give up after: 2 min")
    rig = BENCH + "simulated: {oven 1: {slew: 0.1 K/min, noise: 1 mK}}\n"

    outcome, wire = ended(tmp_path / "run.h5", night(steps), rig)

    assert outcome.why.startswith("oven: is not steady within 0.05 K of 23 degC after 2 min")
    set_s = wire.temperatures(5)[0][0]
    assert wire.when("MEASURE5")[-1] - set_s == pytest.approx(120.0, abs=2.0)
    assert_off_at_once(wire)


def test_a_noise_wider_than_the_band_is_never_steady(tmp_path: Path) -> None:
    rig = BENCH + "simulated: {tec 1: {noise: 500 mK}}\n"

    outcome, wire = ended(tmp_path / "run.h5", NIGHT, rig)

    assert "diode tec: is not steady" in outcome.why
    assert wire.when("OUTPUT1:STATE ON") == []
