"""Setpoints beyond a limit: exit code 4, and nothing beyond it on the wire, whoever is to blame."""

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest
from night_cases import APART, BENCH, DIODE, LADDERS, NIGHT, SWEEP_CURRENT, SWEEP_TEC, Wire, emits, make_night, night

from rigctl.errors import LimitError
from rigctl.interfaces import Driver, Instrument, Options, SourceCapabilities
from rigctl.links.link import Link
from rigctl.plugins import find_drivers
from rigctl.record import load_run
from rigctl.runner.run import run_job

LIMIT_A = 0.045
COOL_OVEN = BENCH.replace("5005, channel: 5}", "5005, channel: 5, limits: {temperature: 15 degC to 30 degC}}")
DRY = "room: {temperature: 21 degC, humidity: 45 %}\n"


@pytest.mark.parametrize(
    ("recipe", "rig", "why"),
    [
        (NIGHT.replace("34 mA", "46 mA"), BENCH, "'diode' is to go to 46 mA, beyond 45 mA of the diode 'D-1'"),
        (NIGHT, BENCH.replace("current: 45 mA", "current: 33 mA"), "34 mA, beyond 33 mA of the diode 'D-1'"),
        (
            NIGHT,
            BENCH.replace("5004, channel: 1}", "5004, channel: 1, limits: {current: 30 mA}}"),
            "34 mA, beyond 30 mA of the rig's limit of 'source 1'",
        ),
        (night(SWEEP_CURRENT.replace("40 mA", "50 mA")), BENCH, "50 mA, beyond 45 mA of the diode 'D-1'"),
        (NIGHT.replace("to: 24 degC", "to: 41 degC"), BENCH, "'diode tec' is to go to 41 degC, beyond 40 degC"),
        (NIGHT.replace("to: 24 degC", "to: 9 degC"), BENCH, "'diode tec' is to go to 9 degC, beyond 10 degC"),
        (night(SWEEP_TEC.replace("20 degC", "5 degC")), BENCH, "5 degC, beyond 10 degC of the diode 'D-1'"),
        (
            NIGHT.replace("26 degC", "26 degC, 31 degC"),
            COOL_OVEN,
            "31 degC, beyond 30 degC of the rig's limit of 'oven 1'",
        ),
        # air of 21 degC and 45 % has its dew point near 8.6 degC; 3 K above that nothing grows a film
        (NIGHT.replace("to: 24 degC", "to: 11 degC"), BENCH + DRY, "11 degC, beyond 11.61 degC of the dew point"),
    ],
)
def test_a_setpoint_beyond_a_limit_is_refused_before_anything_is_opened(
    recipe: str, rig: str, why: str, tmp_path: Path
) -> None:
    wire = Wire()

    with pytest.raises(LimitError, match="Nothing was sent") as told:
        run_job(make_night(tmp_path / "run.h5", recipe, rig, wire=wire))

    assert told.value.exit_code == 4
    assert why in str(told.value)
    assert (wire.opened, wire.said) == ([], [])
    assert list(tmp_path.iterdir()) == []


def test_every_setpoint_beyond_a_limit_is_told_at_once(tmp_path: Path) -> None:
    recipe = NIGHT.replace("34 mA", "46 mA").replace("to: 24 degC", "to: 41 degC").replace("26 degC", "31 degC")

    with pytest.raises(LimitError) as told:
        run_job(make_night(tmp_path / "run.h5", recipe, COOL_OVEN))

    assert [role for role in ("'diode'", "'diode tec'", "'oven'") if role in str(told.value)] == [
        "'diode'",
        "'diode tec'",
        "'oven'",
    ]


class Plugin:
    """A driver of somebody else's that overrides what a test gives it, and keeps every current it was told."""

    def __init__(self, real: Any, **others: Any) -> None:
        self._real, self._others = real, others
        self.told_a: list[float] = []

    def __getattr__(self, name: str) -> Any:
        return self._others.get(name) or getattr(self._real, name)

    def set_current(self, current_a: float) -> float:
        self.told_a.append(current_a)
        change: Callable[[float], float] = self._others.get("lie", lambda read_a: read_a)
        return change(self._real.set_current(current_a))


def plugged(made: list[Plugin], **others: Any) -> dict[str, Driver]:
    drivers: dict[str, Driver] = dict(find_drivers())
    real = drivers["scpi-current-source"]

    def open_source(link: Link, options: Options) -> Instrument:
        made.append(Plugin(real.open(link, options), **others))
        source: Any = made[-1]
        return source  # type: ignore[no-any-return]

    drivers["scpi-current-source"] = replace(real, open=open_source)
    return drivers


def test_a_driver_that_ignores_the_limit_it_was_given_is_never_told_a_current_beyond_it(tmp_path: Path) -> None:
    made: list[Plugin] = []
    drivers = plugged(made, set_limit=lambda current_a: current_a, set_compliance=lambda voltage_v: voltage_v)

    outcome = run_job(make_night(tmp_path / "run.h5", night(LADDERS), drivers=drivers))

    assert outcome.exit_code == 0
    assert 0.0 < max(made[0].told_a) <= LIMIT_A


def test_an_instrument_that_can_do_less_than_its_driver_declared_is_told_nothing_beyond(tmp_path: Path) -> None:
    made: list[Plugin] = []
    job = make_night(tmp_path / "run.h5", drivers=plugged(made, capabilities=SourceCapabilities(0.02, 5.0, 10e-6)))

    outcome = run_job(job)

    assert (outcome.status, outcome.exit_code) == ("failed", 4)
    assert "beyond 0.02 A of the instrument 'source 1'" in outcome.why
    assert set(made[0].told_a) == {0.0}
    assert not emits(job)
    assert load_run(tmp_path / "run.h5").status == "failed"


def test_an_instrument_that_sets_more_than_it_was_told_is_switched_off(tmp_path: Path) -> None:
    """It doubles what it is told: 22.5 mA would stay within the 45 mA, the step after it would not."""
    made, wire = list[Plugin](), Wire()
    job = make_night(tmp_path / "run.h5", rig=APART, wire=wire, drivers=plugged(made, lie=lambda read_a: 2 * read_a))

    outcome = run_job(job)

    assert (outcome.status, outcome.exit_code) == ("failed", 4)
    assert "the output was switched off" in outcome.why
    assert max(made[0].told_a) <= LIMIT_A / 2 + 0.0005 + 1e-5
    assert not emits(job)
    assert wire.said[-1].at_s - max(at_s for at_s, value in wire.currents() if value > 0.0) < 1.0


def test_an_instrument_whose_own_limit_stays_looser_is_not_switched_on(tmp_path: Path) -> None:
    made, wire = list[Plugin](), Wire()
    job = make_night(tmp_path / "run.h5", wire=wire, drivers=plugged(made, set_limit=lambda _current_a: 0.2))

    outcome = run_job(job)

    assert (outcome.status, outcome.exit_code) == ("failed", 4)
    assert "the current limit reads back as 0.2 A" in outcome.why
    assert wire.when("OUTPUT1:STATE ON") == []
    assert set(made[0].told_a) == {0.0}


def test_exactly_the_limit_is_allowed(tmp_path: Path) -> None:
    recipe = NIGHT.replace(DIODE, DIODE.replace("34 mA", "45 mA"))

    assert run_job(make_night(tmp_path / "run.h5", recipe)).exit_code == 0
