"""The recipes and rig files that come with the project read, match and say what they promise."""

from math import prod
from pathlib import Path

import pytest

from rigctl.errors import FileError
from rigctl.files import load_recipe, load_rig, match
from rigctl.files.recipe import Dark, Order, Recipe, Step
from rigctl.files.rig import Rig
from rigctl.plugins import find_bench_factory, find_drivers

RECIPES = Path(__file__).resolve().parents[2] / "recipes"
RIGS = RECIPES / "rigs"
EVERY_RECIPE = sorted(path.stem for path in RECIPES.glob("*.yaml"))
EVERY_RIG = sorted(path.stem for path in RIGS.glob("*.yaml"))
OF_ONE_MOUNT = ("half-wave-plate", "quarter-wave-plate", "sheet-polarizer")


def ready(name: str) -> Recipe:
    return load_recipe(RECIPES / f"{name}.yaml")


def ready_rig(name: str) -> Rig:
    return load_rig(RIGS / f"{name}.yaml", find_drivers(), find_bench_factory())


def visits(step: Step) -> int:
    return prod(len(axis.values) for axis in step.sweep)


@pytest.mark.parametrize("name", EVERY_RECIPE)
def test_every_ready_recipe_seeks_something_or_only_records(name: str) -> None:
    recipe = ready(name)

    assert any(part.unknown for part in recipe.optics) or [part.kind for part in recipe.optics] == ["detector"]


@pytest.mark.parametrize("name", EVERY_RECIPE)
def test_every_ready_recipe_has_darks_before_and_after(name: str) -> None:
    dark = ready(name).darks[0]

    assert (dark.kind, dark.by, dark.before, dark.after) == ("dark", "shutter", True, True)


@pytest.mark.parametrize("name", EVERY_RECIPE)
def test_readings_of_every_ready_recipe_hold_whole_cycles_of_the_mains(name: str) -> None:
    dwell = ready(name).dwell

    tenths = dwell.time_s / dwell.readings / 0.1

    assert tenths == pytest.approx(round(tenths), abs=1e-9)
    assert tenths >= 1


@pytest.mark.parametrize("name", EVERY_RIG)
def test_every_ready_rig_fills_only_with_what_stands_on_it(name: str) -> None:
    rig = ready_rig(name)

    assert {*rig.roles.values()} <= rig.instruments.keys()
    assert all(diode.on in rig.instruments for diode in rig.diodes.values())


@pytest.mark.parametrize("recipe", EVERY_RECIPE)
def test_the_long_bench_does_every_ready_recipe(recipe: str) -> None:
    match(ready(recipe), ready_rig("long-bench"), find_drivers())


@pytest.mark.parametrize("rig", EVERY_RIG)
@pytest.mark.parametrize("recipe", OF_ONE_MOUNT)
def test_every_ready_rig_does_the_recipes_of_one_mount(recipe: str, rig: str) -> None:
    match(ready(recipe), ready_rig(rig), find_drivers())


@pytest.mark.parametrize("rig", ["attic-bench", "cellar-bench"])
def test_a_bench_without_a_driven_diode_is_told_what_a_night_lacks(rig: str) -> None:
    with pytest.raises(FileError) as caught:
        match(ready("plate-at-temperatures"), ready_rig(rig), find_drivers())

    assert [m.key for m in caught.value.mistakes] == ["exit mount", "diode", "diode tec", "oven"]


def test_the_plate_is_measured_at_three_temperatures_between_two_empty_pairs() -> None:
    recipe = ready("plate-at-temperatures")
    before, plate, after = recipe.steps

    assert (before.without, plate.without, after.without) == (("part",), (), ("part",))
    assert plate.sweep[0].role == "oven"
    assert plate.sweep[0].values == (22.0, 25.0, 28.0)
    assert plate.order == Order("interleaved", 3)
    assert visits(before) == visits(after)


def test_the_retardance_of_the_plate_is_found_anew_at_each_temperature() -> None:
    part = next(part for part in ready("plate-at-temperatures").optics if part.name == "part")

    assert (part.warmed_by, part.each, part.taken_out_by) == ("oven", {"retardance": "oven"}, "part slide")


def test_the_light_is_measured_against_current_at_three_temperatures() -> None:
    recipe = ready("light-against-current")
    temperatures, currents = recipe.steps[0].sweep

    assert (temperatures.kind, currents.kind) == ("temperature", "current")
    assert len(temperatures.values) == 3
    assert currents.values[0] == 0.0
    assert currents.ramp_a_per_s == 5e-3
    assert list(currents.values) == sorted({*currents.values})


def test_the_background_of_the_light_against_current_is_taken_with_the_source_off() -> None:
    assert Dark("background", "") in ready("light-against-current").darks


def test_a_polarizer_that_crosses_well_is_measured_finely_around_its_null() -> None:
    recipe = ready("high-extinction")
    turn, null = recipe.steps
    part = next(part for part in recipe.optics if part.name == "part")

    assert part.extinction_ratio is not None
    assert part.extinction_ratio.value <= 1e-4
    assert min(null.sweep[0].values) < 90.0 < max(null.sweep[0].values)
    assert (null.sweep[0].values[1] - null.sweep[0].values[0]) < (turn.sweep[0].values[1] - turn.sweep[0].values[0])


def test_two_polarizers_stand_on_two_mounts_and_one_step_is_shuffled() -> None:
    pair, shuffled = ready("polarizer-pair").steps

    assert [axis.kind for axis in pair.sweep] == ["angle", "angle", "repeat"]
    assert {axis.role for axis in shuffled.sweep} == {"first mount", "second mount"}
    assert shuffled.order.kind == "shuffled"


def test_the_long_bench_keeps_its_diode_within_limits_and_at_its_temperature_at_the_end() -> None:
    rig = ready_rig("long-bench")
    diode = rig.diode("diode")

    assert diode is not None
    assert (diode.current_a, diode.power_w, diode.compliance_v, diode.temperature_c) == (0.045, 0.04, 2.5, (10, 40))
    assert (rig.on_stop["diode tec"], rig.on_stop["oven"]) == ("keep regulating", "switch off")


def test_the_long_bench_speaks_on_every_kind_of_wire() -> None:
    schemes = {entry.at.partition(":")[0] for entry in ready_rig("long-bench").instruments.values()}

    assert schemes == {"tcp", "serial", "visa"}
