"""What a recipe asks for, and whether the duration told beforehand is the one that comes."""

import math
from pathlib import Path

import pytest
from rehearsal_cases import RECIPE, RIG, make_job
from runner_cases import SLOW_HEAD, SWEEP, TWO_CONTROLLERS, TWO_MOUNTS, TWO_STEPS

from rigctl.files import parse_recipe
from rigctl.files.recipe import Axis, Step
from rigctl.record import load_run
from rigctl.runner.bench import declared_capabilities
from rigctl.runner.forecast import Forecast
from rigctl.runner.plan import (
    DARK_DWELLS,
    aperture_s,
    count_visits,
    settle_s,
    step_layouts,
    step_visits,
)
from rigctl.runner.prospect import planned_rows
from rigctl.runner.run import run_job

NO_DARK = RECIPE.replace("dark: {by: shutter, before: true, after: true}", "")
DARK_BEFORE = RECIPE.replace("after: true", "after: false")


def test_the_first_axis_turns_slowest() -> None:
    (step,) = parse_recipe(TWO_MOUNTS, "recipe.yaml").steps

    visits = list(step_visits(step))

    assert [(visit.asked["analyser"], visit.asked["part mount"]) for visit in visits] == [
        (0.0, 10.0),
        (0.0, 50.0),
        (45.0, 10.0),
        (45.0, 50.0),
        (90.0, 10.0),
        (90.0, 50.0),
    ]
    assert [visit.index for visit in visits] == [(0, 0), (0, 1), (1, 0), (1, 1), (2, 0), (2, 1)]
    assert [visit.number for visit in visits] == list(range(6))


def test_visits_bear_the_name_of_their_step_and_count_from_zero_in_each() -> None:
    recipe = parse_recipe(TWO_STEPS, "recipe.yaml")

    visits = [visit for step in recipe.steps for visit in step_visits(step)]

    assert [(visit.step, visit.number) for visit in visits[11:13]] == [("up", 11), ("down", 0)]
    assert count_visits(recipe) == len(visits) == 15


def test_the_grid_of_a_step_has_its_axes_in_the_order_of_the_sweep() -> None:
    (layout,) = step_layouts(parse_recipe(TWO_MOUNTS, "recipe.yaml"))

    assert layout.shape == (3, 2)
    assert [(axis.name, axis.role, axis.units) for axis in layout.axes] == [
        ("analyser_angle", "analyser", "deg"),
        ("part_mount_angle", "part mount", "deg"),
    ]
    assert layout.axes[1].values == (10.0, 50.0)


def test_a_dwell_is_divided_evenly_among_its_readings() -> None:
    assert aperture_s(parse_recipe(RECIPE, "recipe.yaml")) == pytest.approx(0.1)


def test_a_slow_meter_is_given_the_time_to_forget_all_but_a_ten_thousandth() -> None:
    step = Step("data", (Axis("part mount", "angle", (0.0, 5.0), settle_s=0.1),))

    assert math.exp(-settle_s(step, 0.5) / 0.5) == pytest.approx(1e-4)


def test_a_quick_meter_is_given_the_longest_settling_that_an_axis_asks_for() -> None:
    step = Step("data", (Axis("a", "angle", (0.0,), settle_s=0.2), Axis("b", "angle", (0.0,), settle_s=0.3)))

    assert settle_s(step, 1e-3) == 0.3


@pytest.mark.parametrize(("recipe", "darks"), [(NO_DARK, 0), (DARK_BEFORE, 1), (RECIPE, 2), (TWO_STEPS, 4)])
def test_each_step_has_darks_of_its_own(recipe: str, darks: int, tmp_path: Path) -> None:
    job = make_job(tmp_path / "run.h5", recipe=recipe)

    run_job(job)

    planned = planned_rows(job.recipe, duration_s=1.0)
    assert sum(not row.is_open for row in planned) == darks * DARK_DWELLS
    assert len(load_run(tmp_path / "run.h5").darks) == darks * DARK_DWELLS


@pytest.mark.parametrize(
    ("recipe", "rig"),
    [
        (RECIPE, RIG),
        (RECIPE, SLOW_HEAD),
        (NO_DARK, RIG),
        (TWO_STEPS, RIG),
        (TWO_STEPS, SLOW_HEAD),
        (TWO_MOUNTS, TWO_CONTROLLERS),
        (RECIPE, RIG.replace("channel: 3", "channel: 3, moves in: 2 s")),
        (RECIPE, RIG.replace("at: tcp://127.0.0.1:5001", "at: tcp://127.0.0.1:5001, speed: 2 deg/s")),
        (RECIPE.replace(SWEEP, "sweep: [{part mount: {turn: 1, step: 1 deg, approach: from above}}]"), RIG),
    ],
)
def test_the_duration_told_beforehand_is_that_of_the_rehearsal_within_three_percent(
    recipe: str, rig: str, tmp_path: Path
) -> None:
    job = make_job(tmp_path / "run.h5", recipe=recipe, rig=rig)

    outcome = run_job(job)

    expected_s = Forecast(job.recipe, declared_capabilities(job.recipe, job.rig, job.drivers)).duration_s()
    assert outcome.exit_code == 0
    assert expected_s == pytest.approx(job.timeline.now(), rel=0.03)


def test_a_recipe_whose_shutter_nobody_filled_has_a_duration_too(tmp_path: Path) -> None:
    rig = RIG.replace(", shutter: shutter 1", "")
    job = make_job(tmp_path / "run.h5", rig=rig)

    run_job(job)

    capabilities = declared_capabilities(job.recipe, job.rig, job.drivers)
    assert "shutter" not in capabilities
    assert Forecast(job.recipe, capabilities).duration_s() == pytest.approx(job.timeline.now(), rel=0.03)
