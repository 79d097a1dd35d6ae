"""What a recipe lets one expect, held against rehearsals on a bench that is as the recipe says.

Bounds were fixed beforehand.
"""

import math
from pathlib import Path

import numpy as np
import pytest
from rehearsal_cases import RECIPE, RIG, make_job
from runner_cases import SWEEP, TWO_MOUNTS, TWO_STEPS

from rigctl.estimates import fit_run
from rigctl.files import parse_recipe
from rigctl.files.arrangement import train_of
from rigctl.optics import Visits, visits_of
from rigctl.record import load_run
from rigctl.runner.bench import declared_capabilities
from rigctl.runner.plan import DARK_DWELLS
from rigctl.runner.prospect import expected_peak_w, planned_rows, predicted
from rigctl.runner.run import run_job

NIGHTS = 40
AS_WRITTEN = RIG + "simulated: {power: 2 mW, drift: 0 %/h}\n"
DARK_NOISE_ONLY = AS_WRITTEN.replace("5002}", "5002, relative noise: 0, noise: 100 pW}")
EXACT_POWER = RECIPE.replace("2 mW +- 20 %", "2 mW")
NEARLY_KNOWN = RECIPE.replace(SWEEP, "sweep: [{part mount: {turn: 1, step: 5 deg, approach: from below}}]").replace(
    "extinction ratio: 1000:1, unknown",
    "extinction ratio: 1000:1 +- 1 %, dial offset: 0 deg +- 0.01 deg, unknown",
)


def planned(text: str, *, duration_s: float = 3600.0) -> Visits:
    recipe = parse_recipe(text, "recipe.yaml")
    return visits_of(planned_rows(recipe, duration_s=duration_s), train_of(recipe))


@pytest.mark.parametrize("text", [RECIPE, TWO_STEPS, RECIPE.replace("before: true", "before: false")])
def test_planned_darks_and_visits_follow_each_other_as_in_the_run(text: str, tmp_path: Path) -> None:
    run_job(make_job(tmp_path / "run.h5", recipe=text))

    run = load_run(tmp_path / "run.h5")
    lit = [(visit.began_s, True, visit.asked["part mount"]) for visit in run.attempts]
    rows = sorted(lit + [(dark.began_s, False, 0.0) for dark in run.darks])
    visits = planned(text)
    assert visits.is_open.tolist() == [is_open for _, is_open, _ in rows]
    assert visits.angle_deg["part mount"].tolist() == [angle_deg for _, _, angle_deg in rows]


def test_planned_darks_are_a_row_for_each_dwell() -> None:
    assert planned(RECIPE).is_open.tolist() == [False] * DARK_DWELLS + [True] * 12 + [False] * DARK_DWELLS


def test_planned_visits_are_spread_evenly_over_the_run() -> None:
    time_h = planned(RECIPE, duration_s=7200.0).time_h

    assert time_h[0] == 0.0
    assert time_h[-1] == 2.0
    np.testing.assert_allclose(np.diff(time_h), 2.0 / (time_h.size - 1))


def test_every_mount_of_the_train_has_its_planned_angles() -> None:
    visits = planned(TWO_MOUNTS)

    assert visits.angle_deg["analyser"].tolist() == [0.0, 0.0, 45.0, 45.0, 90.0, 90.0]
    assert visits.angle_deg["part mount"].tolist() == [10.0, 50.0] * 3


def test_the_expected_peak_is_the_largest_reading_of_a_rehearsal_where_all_is_as_the_recipe_says(
    tmp_path: Path,
) -> None:
    recipe = EXACT_POWER.replace("unknown: [extinction ratio, dial offset]", "unknown: [extinction ratio]")
    job = make_job(tmp_path / "run.h5", recipe=recipe, rig=AS_WRITTEN)

    run_job(job)

    readings = [v.dwells["signal"].levels_w for v in load_run(tmp_path / "run.h5").visits("data")]
    assert expected_peak_w(job.recipe, "signal") == pytest.approx(max(map(max, readings)), rel=5e-3)


@pytest.mark.parametrize(("power", "margin"), [("2 mW", 1.0), ("2 mW +- 20 %", 1.6), ("2 mW +- 0.1 mW", 1.15)])
def test_a_source_may_be_three_standard_uncertainties_brighter(power: str, margin: float) -> None:
    recipe = parse_recipe(RECIPE.replace("2 mW +- 20 %", power), "recipe.yaml")

    # half of unpolarized light passes the first polarizer, all of that the second where it stands parallel
    assert expected_peak_w(recipe, "signal") == pytest.approx(margin * 1e-3, rel=1e-4)


def test_a_source_of_unstated_power_may_be_half_as_bright_again() -> None:
    recipe = parse_recipe(RECIPE.replace(", power: 2 mW +- 20 %", ""), "recipe.yaml")

    assert expected_peak_w(recipe, "signal") == pytest.approx(1.5 * 0.5e-3, rel=1e-4)


def predicted_u(recipe: str, rig: str, folder: Path) -> dict[str, float]:
    job = make_job(folder / "never.h5", recipe=recipe, rig=rig)
    prediction = predicted(job.recipe, declared_capabilities(job.recipe, job.rig, job.drivers))
    return {estimate.name: estimate.u for estimate in prediction.estimates}


def test_fits_of_many_nights_scatter_as_was_predicted_before_the_first(tmp_path: Path) -> None:
    """Errors in units of the predicted uncertainty: mean 0 and deviation 1, within four standard errors."""
    expected_u = predicted_u(NEARLY_KNOWN, AS_WRITTEN, tmp_path)
    errors: dict[str, list[float]] = {"part.extinction ratio": [], "part.dial offset": []}

    for seed in range(7000, 7000 + NIGHTS):
        path = tmp_path / f"{seed}.h5"
        run_job(make_job(path, recipe=NEARLY_KNOWN, rig=AS_WRITTEN, seed=seed))
        run = load_run(path)
        fitted = fit_run(run)
        for name, found in errors.items():
            estimate = fitted.estimate(name)
            assert estimate is not None
            error = estimate.value - run.header.truth[name]
            found.append((math.remainder(error, 180.0) if estimate.kind == "angle" else error) / expected_u[name])

    for name, found in errors.items():
        assert abs(np.mean(found)) < 4 / math.sqrt(NIGHTS), name
        assert abs(np.std(found, ddof=1) - 1) < 4 / math.sqrt(2 * (NIGHTS - 1)), name


@pytest.mark.parametrize(
    "noise", ["relative noise: 0, noise: NOISE e-11 W", "relative noise: NOISE e-3, noise: 1e-15 W"]
)
def test_a_meter_with_ten_times_the_noise_promises_a_tenth(noise: str, tmp_path: Path) -> None:
    quiet, noisy = (AS_WRITTEN.replace("5002}", f"5002, {noise.replace('NOISE ', n)}}}") for n in ("1", "10"))

    quiet_u, noisy_u = (predicted_u(NEARLY_KNOWN, rig, tmp_path)["part.dial offset"] for rig in (quiet, noisy))
    assert noisy_u == pytest.approx(10 * quiet_u, rel=1e-3)


def test_the_noise_that_counts_is_that_of_the_range_the_run_will_use(tmp_path: Path) -> None:
    """The peak of 1.6 mW needs the 2 mW range; a head that has none goes to 20 mW, where it is ten times noisier."""
    fine, coarse = (
        predicted_u(NEARLY_KNOWN, DARK_NOISE_ONLY.replace("100 pW", f"100 pW, ranges: [2 uW, {full}]"), tmp_path)
        for full in ("2 mW", "20 mW")
    )

    assert coarse["part.dial offset"] == pytest.approx(10 * fine["part.dial offset"], rel=1e-3)


def test_without_darks_the_prediction_refuses_what_the_fit_would_refuse(tmp_path: Path) -> None:
    recipe = NEARLY_KNOWN.replace("dark: {by: shutter, before: true, after: true}", "")
    job = make_job(tmp_path / "run.h5", recipe=recipe, rig=AS_WRITTEN)

    run_job(job)

    prediction = predicted(job.recipe, declared_capabilities(job.recipe, job.rig, job.drivers))
    fitted = fit_run(load_run(tmp_path / "run.h5"))
    assert [refusal.names for refusal in prediction.refusals] == [("part.extinction ratio",)]
    assert [refusal.names for refusal in fitted.refusals] == [("part.extinction ratio",)]
