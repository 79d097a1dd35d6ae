"""From the optics of a recipe to the quantities of its train."""

import pytest
from files_cases import RECIPE, recipe, replaced
from test_files_recipe import PLATE

from rigctl.files import parse_recipe
from rigctl.files.arrangement import train_of
from rigctl.optics import Detector, Element, Quantity, Train
from rigctl.quantities import parse_measured


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
