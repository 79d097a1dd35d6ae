"""Tolerances and wanted uncertainties of every quantity that the optics have, by address."""

import pytest
from files_cases import told
from full_cases import night

from rigctl.files.recipe import Recipe

TOLERANCE = "{part.retardance: 0.49 to 0.51 waves}"
TARGET = "{part.retardance: 0.002 waves}"


def wanting(*, tolerance: str = TOLERANCE, target: str = TARGET) -> Recipe:
    return night({TOLERANCE: tolerance, TARGET: target})


@pytest.mark.parametrize(
    ("address", "written", "ends"),
    [
        ("part.retardance", "176 deg to 184 deg", (176 / 360, 184 / 360)),
        ("part.retardance", "0.49 to 0.51 waves", (0.49, 0.51)),
        ("part.axis", "-1 to 1 deg", (-1.0, 1.0)),
        ("part.dial offset", "-30 arcmin to 30 arcmin", (-0.5, 0.5)),
        ("part.temperature coefficient", "-200 ppm/K to 0 ppm/K", (-2e-4, 0.0)),
        ("entry cube.extinction ratio", "0 to 1000:1", (0.0, 1e-3)),
        ("exit cube.extinction ratio", "1000:1 to 10000:1", (1e-4, 1e-3)),
        ("exit cube.axis", "22 to 23 deg", (22.0, 23.0)),
        ("pick-off.fraction", "3.5 % to 4.5 %", (0.035, 0.045)),
        ("signal.stray light", "0 nW to 5 nW", (0.0, 5e-9)),
    ],
)
def test_every_quantity_of_the_optics_may_have_a_tolerance(
    address: str, written: str, ends: tuple[float, float]
) -> None:
    recipe = wanting(tolerance=f"{{{address}: {written}}}")

    assert recipe.tolerances == {address: pytest.approx(ends)}


@pytest.mark.parametrize(
    ("address", "written", "u"),
    [
        ("part.retardance", "1 deg", 1 / 360),
        ("part.retardance", "1 %", 0.005),
        ("part.retardance", "0.004 waves (k=2)", 0.002),
        ("part.dial offset", "0.05 deg", 0.05),
        ("part.temperature coefficient", "20 ppm/K", 2e-5),
        ("entry cube.extinction ratio", "10 %", 1e-4),
        ("entry cube.extinction ratio", "0.0001", 1e-4),
        ("signal.stray light", "100 pW", 1e-10),
    ],
)
def test_every_quantity_of_the_optics_may_be_wanted_so_well(address: str, written: str, u: float) -> None:
    recipe = wanting(target=f"{{{address}: {written}}}")

    assert recipe.targets == {address: pytest.approx(u)}


def test_several_quantities_may_be_wanted() -> None:
    recipe = wanting(
        tolerance="{part.retardance: 0.49 to 0.51 waves, part.dial offset: -5 to 5 deg}",
        target="{part.retardance: 0.002 waves, part.dial offset: 0.1 deg}",
    )

    assert recipe.tolerances.keys() == recipe.targets.keys() == {"part.retardance", "part.dial offset"}


def test_a_recipe_that_wants_nothing_has_neither() -> None:
    recipe = night({f"tolerance: {TOLERANCE}\n": "", f"target uncertainty: {TARGET}\n": ""})

    assert (recipe.tolerances, recipe.targets) == ({}, {})


@pytest.mark.parametrize(
    ("tolerance", "what"),
    [
        ("{retardance: 0.49 to 0.51 waves}", "no quantity is called 'retardance'"),
        ("{part.extinction ratio: 0 to 1000:1}", "no quantity is called 'part.extinction ratio'"),
        ("{monitor.stray light: 0 to 1 nW}", "no quantity is called 'monitor.stray light'"),
        ("{part.retardance: 0.49 to 0.51}", "'0.51' has no unit"),
        ("{part.retardance: 0.49 to 0.51 mW}", "'mW' is not a unit of a retardance"),
        ("{part.retardance: 0.5 waves to 0.5 waves}", "the span '0.5 waves to 0.5 waves' does not go up"),
        ("{part.retardance: [0.49 waves, 0.51 waves]}", "a list stands here"),
        ("{part.retardance: }", "nothing is written here"),
        ("0.49 to 0.51 waves", "'0.49 to 0.51 waves' stands here"),
    ],
)
def test_a_tolerance_that_is_none_is_told(tolerance: str, what: str) -> None:
    (line,) = told(lambda: wanting(tolerance=tolerance))

    assert line.split(": ", 1)[1].startswith(what)


@pytest.mark.parametrize(
    ("target", "what"),
    [
        ("{part.retardence: 1 %}", "no quantity is called 'part.retardence'"),
        ("{part.retardance: 0.002}", "'0.002' has no unit"),
        ("{part.retardance: -0.002 waves}", "the uncertainty in '0.5 waves +- -0.002 waves' is not positive"),
        ("{part.dial offset: 0.002 waves}", "'waves' is not a unit of an angle"),
        ("{exit cube.extinction ratio: 100:1}", "'+- 100:1' is no uncertainty of a ratio"),
        ("{pick-off.fraction: 1 %}", "'+- 1 %' behind a value in % may mean two things"),
    ],
)
def test_a_wanted_uncertainty_that_is_none_is_told(target: str, what: str) -> None:
    (line,) = told(lambda: wanting(target=target))

    assert line.split(": ", 1)[1].startswith(what)
