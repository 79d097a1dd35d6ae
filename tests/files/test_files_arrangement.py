"""From the optics of a recipe to the quantities of its train."""

from pathlib import Path

import pytest
from files_cases import NOTHING, RECIPE, Changes, recipe, replaced
from full_cases import NIGHT, night
from test_files_recipe import PLATE

from rigctl.files import load_recipe, parse_recipe
from rigctl.files.arrangement import train_of
from rigctl.optics import Detector, Element, Quantity, Train
from rigctl.quantities import parse_measured

RECIPES = Path(__file__).resolve().parents[2] / "recipes"


def plate() -> Train:
    return train_of(parse_recipe(PLATE, "p.yaml"))


def test_the_elements_keep_the_order_of_the_light() -> None:
    assert plate().elements == (
        Element("entry cube", "polarizer"),
        Element("plate", "retarder", "part mount"),
        Element("exit cube", "polarizer"),
    )


def test_the_detectors_bear_the_names_of_their_roles() -> None:
    assert train_of(recipe()).detectors == (Detector("signal"),)


def test_every_quantity_has_its_address() -> None:
    assert sorted(plate().quantities) == [
        "entry cube.axis",
        "entry cube.extinction ratio",
        "exit cube.axis",
        "exit cube.extinction ratio",
        "plate.axis",
        "plate.dial offset",
        "plate.retardance",
        "signal.stray light",
        "source.drift",
        "source.power",
    ]


@pytest.mark.parametrize(
    "quantity",
    [
        Quantity("source.drift", "drift", 0.0, 0.005),
        Quantity("entry cube.axis", "angle", 0.0),
        Quantity("entry cube.extinction ratio", "ratio", 1e-3),
        Quantity("exit cube.axis", "angle", 22.5, 0.2),
        Quantity("plate.axis", "angle", 0.0),
        Quantity("plate.retardance", "retardance", 0.5, is_unknown=True),
        Quantity("plate.dial offset", "angle", 0.0, 5.0, is_unknown=True),
        Quantity("signal.stray light", "power", 20e-9, 20e-9, is_unknown=True),
    ],
    ids=lambda quantity: quantity.name,
)
def test_a_quantity_is_unknown_uncertain_or_exact_as_the_recipe_says(quantity: Quantity) -> None:
    assert plate().quantities[quantity.name] == quantity


def test_power_drift_and_stray_light_are_free_where_nothing_is_said_of_them() -> None:
    text = replaced(RECIPE, {", power: 2 mW +- 30 %": ""})

    quantities = train_of(parse_recipe(text, "r.yaml")).quantities

    assert [quantities[name] for name in ("source.power", "source.drift", "signal.stray light")] == [
        Quantity("source.power", "power", 1e-3, is_free=True),
        Quantity("source.drift", "drift", 0.0, is_free=True),
        Quantity("signal.stray light", "power", 0.0, is_free=True),
    ]


def test_the_tolerance_of_the_power_is_no_prior() -> None:
    power = train_of(recipe()).quantities["source.power"]

    assert (power.value, power.is_free, power.prior_u) == (2e-3, True, None)


def test_a_drift_or_stray_light_without_tolerance_is_where_the_fit_starts() -> None:
    text = replaced(
        RECIPE, {"power: 2 mW +- 30 %": "drift: 1 %/h", "{role: signal}": "{role: signal, stray light: 5 nW}"}
    )

    quantities = train_of(parse_recipe(text, "r.yaml")).quantities

    assert [quantities[name] for name in ("source.drift", "signal.stray light")] == [
        Quantity("source.drift", "drift", 0.01, is_free=True),
        Quantity("signal.stray light", "power", 5e-9, is_free=True),
    ]


@pytest.mark.parametrize("written", ["395 nm +- 2 nm", "0.503057 waves +- 0.00254712 waves"])
def test_a_retardance_in_nanometres_arrives_in_waves(written: str) -> None:
    train = train_of(parse_recipe(replaced(PLATE, {"0.5 waves": written}), "p.yaml"))

    expected = parse_measured("395 nm +- 2 nm", "retardance", wavelength_m=785.2e-9)

    found = train.quantities["plate.retardance"]
    assert (found.value, found.u) == pytest.approx((expected.value, expected.u), rel=1e-5)


def whole(changes: Changes = NOTHING, filled: tuple[str, ...] | None = None) -> Train:
    return train_of(night(changes), filled=filled)


def test_a_pick_off_has_a_detector_behind_it_before_the_one_at_the_end() -> None:
    assert whole().detectors == (Detector("monitor", after="pick-off"), Detector("signal"))


def test_a_warmed_element_knows_what_warms_it_and_from_where_on() -> None:
    assert whole().elements[1:3] == (
        Element("pick-off", "pick-off"),
        Element("part", "retarder", "part mount", warmed_by="oven", reference_temperature_c=25.0),
    )


def test_without_its_meter_a_pick_off_takes_its_part_of_the_light_all_the_same() -> None:
    train = whole(filled=("signal", "part mount"))

    assert train.detectors == (Detector("signal"),)
    assert train.element("pick-off").kind == "pick-off"
    assert "pick-off.fraction" in train.quantities
    assert "monitor.stray light" not in train.quantities


@pytest.mark.parametrize(
    "quantity",
    [
        Quantity("pick-off.fraction", "fraction", 0.04),
        Quantity("part.temperature coefficient", "coefficient", 0.0),
        Quantity("monitor.stray light", "power", 0.0, is_free=True),
        Quantity("signal.stray light", "power", 0.0, is_unknown=True, is_free=True),
        Quantity("quarter-wave plate.retardance", "retardance", 0.25, 0.003),
    ],
    ids=lambda quantity: quantity.name,
)
def test_a_quantity_of_a_whole_bench_is_known_as_the_recipe_says(quantity: Quantity) -> None:
    assert whole().quantities[quantity.name] == quantity


def test_a_fraction_may_be_uncertain_or_unknown() -> None:
    uncertain = whole({"fraction: 4 %": "fraction: 0.04 +- 0.002"}).quantities["pick-off.fraction"]
    unknown = whole({"fraction: 4 %": "fraction: 4 %, unknown: fraction"}).quantities["pick-off.fraction"]

    assert (uncertain.u, uncertain.is_unknown, unknown.is_unknown) == (0.002, False, True)


def test_a_temperature_coefficient_may_be_unknown() -> None:
    said = "temperature coefficient: -100 ppm/K, unknown: [retardance, temperature coefficient, dial offset]"

    found = whole({"unknown: [retardance, dial offset]": said}).quantities["part.temperature coefficient"]

    assert found == Quantity("part.temperature coefficient", "coefficient", -1e-4, is_unknown=True)


def test_a_quantity_that_is_found_anew_names_its_levels() -> None:
    levels = {"dial offset]}": "dial offset], each: {retardance: oven, dial offset: step}}"}
    stray = {"role: signal, unknown: stray light": "role: signal, each: {stray light: step}"}

    quantities = whole({**levels, **stray}).quantities

    assert {name: q.each for name, q in quantities.items() if q.each} == {
        "part.retardance": "oven",
        "part.dial offset": "step",
        "signal.stray light": "step",
    }


def test_a_detector_alone_makes_a_train() -> None:
    text = replaced(NIGHT, {})
    optics = text[text.index("optics:") : text.index("prepare:")]
    changes = {
        optics: "optics:\n  - detector: {role: signal}\n",
        "  part mount: rotation stage\n": "",
        "  monitor:    {is: power meter, optional: true}\n": "",
        "    without: part\n": "",
        "[{part mount: {turn: 1, step: 10 deg}}]": "[{diode: {range: 0 to 50 mA, step: 1 mA}}]",
        "      - part mount: {turn: 1, step: 5 deg, approach: from below, settle: 150 ms}\n": "",
        "- oven: {values": "- diode tec: {values",
        "  oven:       temperature controller\n": "",
        "tolerance: {part.retardance: 0.49 to 0.51 waves}\n": "",
        "target uncertainty: {part.retardance: 0.002 waves}\n": "",
    }

    assert whole(changes).elements == ()


@pytest.mark.parametrize("path", sorted(RECIPES.glob("*.yaml")), ids=lambda path: path.stem)
def test_every_ready_recipe_has_a_train(path: Path) -> None:
    train = train_of(load_recipe(path))

    assert train.detectors[-1].after is None
    assert [q for q in train.fitted if q.is_unknown] or not train.elements
