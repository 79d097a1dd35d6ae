"""Darks in whole nights: of three kinds, before, during and after steps, each with its time and range."""

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from night_cases import BENCH, NIGHT, STEPS, Wire, emits, make_night, night

from rigctl.errors import PlanError
from rigctl.record import load_run
from rigctl.record.records import Dark
from rigctl.runner.person import NobodyThere
from rigctl.runner.plan import DARK_DWELLS
from rigctl.runner.run import run_job

ALL_KINDS = """dark: {by: shutter, before: true, after: true}
background: {before: true, after: true}
zero: {before: true, after: true}
"""
LONG = """steps:
  - name: long
    sweep:
      - part mount: {turn: 2, step: 4 deg}
"""
TIMED = "dark: {by: shutter, before: true, after: false, every: 60 s}\n"


def darks_of(path: Path, recipe: str, rig: str = BENCH) -> list[Dark]:
    job = make_night(path, recipe, rig)
    assert run_job(job).exit_code == 0
    return list(load_run(path).darks)


def told(darks: list[Dark]) -> list[tuple[str, str, str, str]]:
    """What was taken, in which step, when and how; the dwells of one dark count once."""
    rows = [(dark.what, dark.step, dark.when, dark.how) for dark in darks]
    return [row for place, row in enumerate(rows) if place == 0 or rows[place - 1] != row]


def test_darks_of_three_kinds_stand_in_the_order_that_suits_the_source(tmp_path: Path) -> None:
    """Zeros and backgrounds before the source goes on and after it went off; darks round every step."""
    darks = darks_of(tmp_path / "run.h5", night(darks=ALL_KINDS))

    assert sorted(told(darks)[:2]) == [
        ("background", "empty", "before", "source off"),
        ("zero", "empty", "before", "by hand"),
    ]
    assert told(darks)[2:6] == [
        ("dark", "empty", "before", "by shutter"),
        ("dark", "empty", "after", "by shutter"),
        ("dark", "plate", "before", "by shutter"),
        ("dark", "plate", "after", "by shutter"),
    ]
    assert sorted(told(darks)[6:]) == [
        ("background", "plate", "after", "source off"),
        ("zero", "plate", "after", "by hand"),
    ]


def test_every_dark_keeps_the_times_of_its_dwells_and_the_ranges_they_were_taken_on(tmp_path: Path) -> None:
    run_job(make_night(tmp_path / "run.h5", night(darks=ALL_KINDS)))

    run = load_run(tmp_path / "run.h5")
    ends = [0.0]
    for dark in run.darks:
        assert ends[-1] <= dark.began_s < dark.ended_s
        assert dark.dwells.keys() == {"signal", "monitor"}
        for dwell in dark.dwells.values():
            assert dark.began_s <= dwell.began_s < dwell.ended_s <= dark.ended_s + 1e-9
            assert len(dwell.levels_w) == 4
        ends.append(dark.ended_s)
    used = {visit.dwells["signal"].range_w for step in ("empty", "plate") for visit in run.visits(step)}
    after = {dark.dwells["signal"].range_w for dark in run.darks if (dark.step, dark.when) == ("plate", "after")}
    assert used <= after


def test_light_of_the_source_reaches_the_detectors_in_no_dark_of_any_kind(tmp_path: Path) -> None:
    rig = BENCH + "simulated: {head 1: {stray light: 20 uW, noise: 1 nW}}\n"

    darks = darks_of(tmp_path / "run.h5", night(darks=ALL_KINDS), rig)

    mean_w = {
        what: np.mean([dark.dwells["signal"].levels_w for dark in darks if dark.what == what])
        for what in ("dark", "background", "zero")
    }
    # light beside the beam is there with the source off or blocked; a cap keeps it away as well
    assert mean_w["dark"] == pytest.approx(20e-6, rel=0.01)
    assert mean_w["background"] == pytest.approx(20e-6, rel=0.01)
    assert abs(mean_w["zero"]) < 1e-8


def test_for_a_background_the_way_is_open_and_the_source_off(tmp_path: Path) -> None:
    wire = Wire()
    job = make_night(tmp_path / "run.h5", night(darks="background: {before: true, after: true}\n"), wire=wire)

    assert run_job(job).exit_code == 0

    for dark in load_run(tmp_path / "run.h5").darks:
        outputs = [said.text for said in wire.said if "OUTPUT1:STATE O" in said.text and said.at_s <= dark.began_s]
        ways = [said.text for said in wire.said if "(@3);" in said.text and said.at_s <= dark.began_s]
        assert "OFF" in outputs[-1]
        assert [way for way in ways if not way.startswith("ROUTE:CLOSE?")][-1].startswith("ROUTE:CLOSE (@3)")
    assert not emits(job)


def test_timed_darks_come_again_during_a_step_and_the_light_is_let_in_behind_each(tmp_path: Path) -> None:
    job = make_night(tmp_path / "run.h5", night(LONG, darks=TIMED))

    assert run_job(job).exit_code == 0

    run = load_run(tmp_path / "run.h5")
    during = [dark for dark in run.darks if dark.when == "during"]
    visits = run.visits("long")
    length_s = visits[-1].ended_s - visits[0].began_s
    assert len(visits) == 180
    assert len(during) == DARK_DWELLS * int(length_s // 60.0)
    firsts = [dark.began_s for dark in during[::DARK_DWELLS]]
    lasts = [run.darks[DARK_DWELLS - 1].ended_s, *(dark.ended_s for dark in during[DARK_DWELLS - 1 :: DARK_DWELLS])]
    longest_s = max(visit.ended_s - visit.began_s for visit in visits)
    for first_s, last_s in zip(firsts, lasts, strict=False):
        assert 60.0 <= first_s - last_s <= 60.0 + 1.5 * longest_s
    dark_w = max(max(dark.dwells["monitor"].levels_w) for dark in run.darks)
    assert min(min(visit.dwells["monitor"].levels_w) for visit in visits) > 10.0 * dark_w


def test_a_timed_dark_is_never_taken_amid_a_visit(tmp_path: Path) -> None:
    run_job(make_night(tmp_path / "run.h5", night(LONG, darks=TIMED)))

    run = load_run(tmp_path / "run.h5")
    for dark in run.darks:
        assert not any(visit.began_s < dark.began_s < visit.ended_s for visit in run.visits("long"))


def test_darks_after_an_overload_are_taken_on_both_ranges(tmp_path: Path) -> None:
    """The source is eight times as bright as the recipe says: the first visits overload the smaller range."""
    recipe = NIGHT.replace("power: 2 mW +- 20 %", "power: 0.4 mW +- 1 %")
    rig = BENCH + "simulated: {power: 3.2 mW}\n"

    run_job(make_night(tmp_path / "run.h5", recipe, rig))

    run = load_run(tmp_path / "run.h5")
    used = {attempt.dwells["signal"].range_w for attempt in run.attempts}
    after = [dark for dark in run.darks if (dark.what, dark.step, dark.when) == ("dark", "plate", "after")]
    assert len(used) == 2
    assert {dark.dwells["signal"].range_w for dark in after} == used
    assert len(after) == 2 * DARK_DWELLS


@pytest.mark.parametrize("darks", ["zero: {before: true, after: false}\n", "dark: {by: hand}\n"])
def test_with_nobody_there_darks_that_need_hands_are_refused_before_anything_is_sent(
    darks: str, tmp_path: Path
) -> None:
    wire = Wire()
    job = make_night(tmp_path / "run.h5", night(STEPS, darks=darks), wire=wire)

    with pytest.raises(PlanError, match="by hand") as told:
        run_job(replace(job, person=NobodyThere()))

    assert told.value.exit_code == 2
    assert wire.opened == []
