"""Do the fit's uncertainties mean what they say? Whole rehearsals of the ready recipes, fitted from their run files.

A pull is (estimate - truth) / standard uncertainty: mean 0 and standard deviation 1 for an honest fit. The fit reads
the run file alone, where nothing of the truth enters it. Bounds were fixed beforehand; for 500 seeds they are those of
the project's goals, for fewer seeds four standard errors wide.
"""

import math
from collections.abc import Mapping
from concurrent.futures import ProcessPoolExecutor
from pathlib import Path

import numpy as np
import pytest

from rigctl.estimates import fit_run
from rigctl.files import load_recipe, match, parse_rig
from rigctl.plugins import find_bench_factory, find_drivers
from rigctl.record import load_run
from rigctl.runner.progress import Silent
from rigctl.runner.rehearsal import rehearsal_job
from rigctl.runner.run import run_job

RECIPES = Path(__file__).resolve().parent.parent / "recipes"
# what a sweep cannot tell apart, from the physics: an axis has no direction, and between parallel polarizers a plate
# with swapped axes looks the same
PERIODS_DEG = {"sheet-polarizer": 180.0, "quarter-wave-plate": 90.0, "half-wave-plate": 180.0}
UNKNOWNS = {
    "sheet-polarizer": ("part.extinction ratio", "part.dial offset"),
    "quarter-wave-plate": ("part.retardance", "part.dial offset"),
    "half-wave-plate": ("part.retardance", "part.dial offset"),
}


def pulls(recipe_name: str, seed: int, folder: Path) -> Mapping[str, float]:
    """Rehearse one night and return the pull of each unknown."""
    drivers, factory = find_drivers(), find_bench_factory()
    recipe = load_recipe(RECIPES / f"{recipe_name}.yaml")
    text = factory.default_rig({name: role.kind for name, role in recipe.roles.items()})
    rig = parse_rig(text, "default", drivers, factory)
    match(recipe, rig, drivers)
    path = folder / f"{recipe_name}-{seed}.h5"
    job = rehearsal_job(recipe, rig, drivers=drivers, factory=factory, seed=seed, path=path, progress=Silent())
    outcome = run_job(job)
    assert outcome.exit_code == 0, outcome.why
    run = load_run(path)
    path.unlink()
    fitted, found = fit_run(run), {}
    for name in UNKNOWNS[recipe_name]:
        estimate = fitted.estimate(name)
        assert estimate is not None, f"seed {seed}: {name} was refused: {fitted.refusals}"
        error = estimate.value - run.header.truth[name]
        if estimate.kind == "angle":
            error = math.remainder(error, PERIODS_DEG[recipe_name])
        found[name] = error / estimate.u
    return found


def _pulls(arguments: tuple[str, int, Path]) -> Mapping[str, float]:
    return pulls(*arguments)


def check(found: list[Mapping[str, float]], *, most_mean: float, sd: tuple[float, float]) -> None:
    for name in found[0]:
        values = np.array([pull[name] for pull in found])
        mean, spread = float(np.mean(values)), float(np.std(values, ddof=1))
        print(f"{name}: {values.size} pulls, mean {mean:+.3f}, sd {spread:.3f}, largest {abs(values).max():.1f}")
        assert abs(mean) < most_mean, name
        assert sd[0] < spread < sd[1], name


@pytest.mark.parametrize("recipe_name", sorted(UNKNOWNS))
def test_pulls_of_a_few_nights_are_those_of_an_honest_fit(recipe_name: str, tmp_path: Path) -> None:
    found = [pulls(recipe_name, seed, tmp_path) for seed in range(5000, 5040)]

    # four standard errors: 4/sqrt(40) and 4/sqrt(2*39)
    check(found, most_mean=0.64, sd=(0.55, 1.46))


@pytest.mark.soak
@pytest.mark.parametrize("recipe_name", sorted(UNKNOWNS))
def test_pulls_of_500_nights_are_those_of_an_honest_fit(recipe_name: str, tmp_path: Path) -> None:
    with ProcessPoolExecutor(2) as pool:
        found = list(pool.map(_pulls, [(recipe_name, seed, tmp_path) for seed in range(1, 501)], chunksize=25))

    check(found, most_mean=0.2, sd=(0.87, 1.13))
