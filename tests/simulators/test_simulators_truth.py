"""The hidden truth: what is drawn, about what, how widely, and what is never drawn."""

import math
import statistics
from collections.abc import Mapping

import pytest

from rigctl.optics import Detector, Element, Quantity, Train
from rigctl_sim.truth import (
    COEFFICIENT_PER_K,
    DRIFT_PER_H,
    EXTINCTION_SPREAD,
    FRACTION_SPREAD,
    RETARDANCE_WAVES,
    STRAY_PART,
    draw_truth,
    truth_at_levels,
)

POWER_W = 2e-3
SEEDS = 400


def make_train(*quantities: Quantity) -> Train:
    usual = (
        Quantity("source.power", "power", POWER_W, is_free=True),
        Quantity("source.drift", "drift", 0.0, is_free=True),
        Quantity("cube.axis", "angle", 0.0),
        Quantity("cube.extinction ratio", "ratio", 1e-3, 2e-4),
        Quantity("part.axis", "angle", 0.0),
        Quantity("part.retardance", "retardance", 0.25, is_unknown=True),
        Quantity("part.dial offset", "angle", 0.0, is_unknown=True),
        Quantity("signal.stray light", "power", 0.0, is_free=True),
    )
    named = {quantity.name: quantity for quantity in (*usual, *quantities)}
    return Train((Element("cube", "polarizer"), Element("part", "retarder", "mount")), (Detector("signal"),), named)


def drawn(name: str, *quantities: Quantity, power_u_w: float | None = None) -> list[float]:
    train = make_train(*quantities)
    return [draw_truth(train, seed, given={}, power_u_w=power_u_w)[name] for seed in range(SEEDS)]


def assert_normal(values: list[float], *, mean: float, sd: float) -> None:
    """Mean and standard deviation within five standard errors."""
    assert statistics.fmean(values) == pytest.approx(mean, abs=5 * sd / math.sqrt(SEEDS))
    assert statistics.stdev(values) == pytest.approx(sd, rel=5 / math.sqrt(2 * SEEDS))


def truth(seed: int = 1, *, given: Mapping[str, float] | None = None) -> dict[str, float]:
    return draw_truth(make_train(), seed, given=given or {})


def test_every_quantity_has_a_truth() -> None:
    assert set(truth()) == set(make_train().quantities)


def test_the_same_seed_draws_the_same_and_another_does_not() -> None:
    assert truth(1) == truth(1)
    assert truth(1)["part.retardance"] != truth(2)["part.retardance"]


def test_exact_quantities_are_what_the_recipe_says() -> None:
    assert (truth()["cube.axis"], truth()["part.axis"]) == (0.0, 0.0)


def test_a_tolerance_is_the_standard_deviation() -> None:
    assert_normal(drawn("cube.extinction ratio"), mean=1e-3, sd=2e-4)


def test_an_unknown_with_a_tolerance_keeps_to_it() -> None:
    given = Quantity("part.retardance", "retardance", 0.37, 0.02, is_unknown=True)

    assert_normal(drawn("part.retardance", given), mean=0.37, sd=0.02)


def test_an_unknown_retardance_without_a_tolerance_lies_near_its_nominal_value() -> None:
    assert_normal(drawn("part.retardance"), mean=0.25, sd=RETARDANCE_WAVES)


def test_an_unknown_dial_offset_can_be_anything() -> None:
    offsets = drawn("part.dial offset")

    assert all(-180.0 <= offset <= 180.0 for offset in offsets)
    # uniform: standard deviation 360/sqrt(12)
    assert_normal(offsets, mean=0.0, sd=360.0 / math.sqrt(12.0))


def test_an_unknown_axis_is_known_to_half_a_turn_only() -> None:
    axes = drawn("part.axis", Quantity("part.axis", "angle", 0.0, is_unknown=True))

    assert all(-90.0 <= axis <= 90.0 for axis in axes)
    assert max(axes) > 80.0


def test_an_unknown_extinction_ratio_is_off_by_a_factor() -> None:
    ratios = drawn("cube.extinction ratio", Quantity("cube.extinction ratio", "ratio", 1e-3, is_unknown=True))

    assert_normal([math.log(ratio / 1e-3) for ratio in ratios], mean=0.0, sd=EXTINCTION_SPREAD)


def test_ratios_and_powers_are_positive_however_wide_their_tolerance() -> None:
    ratios = drawn("cube.extinction ratio", Quantity("cube.extinction ratio", "ratio", 1e-5, 1e-4))
    stray = drawn("signal.stray light", Quantity("signal.stray light", "power", 1e-9, 1e-8))

    assert min(ratios) > 0.0
    assert min(stray) > 0.0


def test_the_source_is_off_by_a_tenth_when_nobody_knows_better() -> None:
    assert_normal(drawn("source.power"), mean=POWER_W, sd=0.1 * POWER_W)


def test_the_source_keeps_to_a_stated_tolerance() -> None:
    assert_normal(drawn("source.power", power_u_w=1e-5), mean=POWER_W, sd=1e-5)


def test_an_unstated_drift_is_small_and_of_either_sign() -> None:
    assert_normal(drawn("source.drift"), mean=0.0, sd=DRIFT_PER_H)


@pytest.mark.parametrize("u", [None, 1e-4])
def test_a_stated_drift_is_kept(u: float | None) -> None:
    drifts = drawn("source.drift", Quantity("source.drift", "drift", 0.05, u))

    assert all(abs(drift - 0.05) <= 6 * (u or 0.0) for drift in drifts)


def test_stray_light_is_a_small_part_of_the_source() -> None:
    train = make_train()
    truths = [draw_truth(train, seed, given={}) for seed in range(SEEDS)]

    parts = [truth["signal.stray light"] / truth["source.power"] for truth in truths]

    assert_normal(parts, mean=STRAY_PART, sd=0.3 * STRAY_PART)


def test_stated_stray_light_is_exact() -> None:
    assert set(drawn("signal.stray light", Quantity("signal.stray light", "power", 3e-9))) == {3e-9}


def test_what_the_rig_file_gives_is_not_drawn() -> None:
    given = {"source.power": 5e-3, "signal.stray light": 0.0}

    found = truth(given=given)

    assert (found["source.power"], found["signal.stray light"]) == (5e-3, 0.0)


def test_one_quantity_more_leaves_the_others_as_they_were() -> None:
    before = truth()
    train = make_train()
    more = Train(
        (*train.elements, Element("exit", "polarizer")),
        train.detectors,
        {
            **train.quantities,
            "exit.axis": Quantity("exit.axis", "angle", 0.0, 0.1),
            "exit.extinction ratio": Quantity("exit.extinction ratio", "ratio", 1e-3, 1e-4),
        },
    )

    after = draw_truth(more, 1, given={})

    assert {name: after[name] for name in before} == before


OVEN_LEVELS: Mapping[str, Mapping[str, float | None]] = {
    "oven": {"22 degC": 22.0, "25 degC": 25.0, "28 degC": 28.0},
    "step": {"empty": None, "plate": None},
}
COEFFICIENT = "part.temperature coefficient"


def warm_train(each: str | None, coefficient: Quantity | None = None) -> Train:
    """The usual train with its part in an oven, and a pick-off."""
    usual = make_train()
    retardance = Quantity("part.retardance", "retardance", 0.25, is_unknown=True, each=each)
    exact = Quantity(COEFFICIENT, "coefficient", 0.0)
    named = {
        **usual.quantities,
        retardance.name: retardance,
        exact.name: coefficient or exact,
        "tap.fraction": Quantity("tap.fraction", "fraction", 0.04, is_unknown=True),
    }
    part = Element("part", "retarder", "mount", warmed_by="oven", reference_temperature_c=25.0)
    return Train((usual.elements[0], Element("tap", "pick-off"), part), usual.detectors, named)


def drawn_from(train: Train, name: str) -> list[float]:
    return [draw_truth(train, seed, given={})[name] for seed in range(SEEDS)]


def test_the_fraction_of_a_pick_off_is_off_by_a_tenth_when_nobody_knows_better() -> None:
    assert_normal(drawn_from(warm_train(None), "tap.fraction"), mean=0.04, sd=0.04 * FRACTION_SPREAD)


def test_a_coefficient_that_the_recipe_leaves_out_is_none() -> None:
    assert set(drawn_from(warm_train(None), COEFFICIENT)) == {0.0}


def test_a_stated_coefficient_is_kept() -> None:
    stated = Quantity(COEFFICIENT, "coefficient", -1e-4, 2e-5)

    assert_normal(drawn_from(warm_train(None, stated), COEFFICIENT), mean=-1e-4, sd=2e-5)


def test_an_unknown_coefficient_is_drawn_as_wide_as_that_of_quartz() -> None:
    unknown = Quantity(COEFFICIENT, "coefficient", 0.0, is_unknown=True)

    assert_normal(drawn_from(warm_train(None, unknown), COEFFICIENT), mean=0.0, sd=COEFFICIENT_PER_K)


def test_a_retardance_sought_at_each_temperature_goes_with_temperature() -> None:
    assert_normal(drawn_from(warm_train("oven"), COEFFICIENT), mean=0.0, sd=COEFFICIENT_PER_K)


def test_a_retardance_sought_in_each_step_does_not() -> None:
    assert set(drawn_from(warm_train("step"), COEFFICIENT)) == {0.0}


def test_every_level_has_its_truth_from_one_draw() -> None:
    train = warm_train("oven")
    found = draw_truth(train, 1, given={})

    levels = truth_at_levels(train, found, OVEN_LEVELS)

    base, coefficient = found["part.retardance"], found[COEFFICIENT]
    assert levels == pytest.approx(
        {
            "part.retardance @ 22 degC": base * (1.0 - 3.0 * coefficient),
            "part.retardance @ 25 degC": base,
            "part.retardance @ 28 degC": base * (1.0 + 3.0 * coefficient),
        },
        rel=1e-12,
    )
    assert coefficient != 0.0


def test_steps_share_one_value() -> None:
    train = warm_train("step")
    found = draw_truth(train, 1, given={})

    levels = truth_at_levels(train, found, OVEN_LEVELS)

    assert levels == dict.fromkeys(["part.retardance @ empty", "part.retardance @ plate"], found["part.retardance"])


def test_a_truth_without_levels_has_none() -> None:
    train = warm_train(None)

    assert truth_at_levels(train, draw_truth(train, 1, given={}), OVEN_LEVELS) == {}


def test_levels_of_another_temperature_do_not_warm_the_element() -> None:
    train = warm_train("diode tec", Quantity(COEFFICIENT, "coefficient", 1e-3))
    found = draw_truth(train, 1, given={})

    levels = truth_at_levels(train, found, {"diode tec": {"20 degC": 20.0, "30 degC": 30.0}})

    assert set(levels.values()) == {found["part.retardance"]}
    assert len(levels) == 2


def test_what_the_oven_does_not_warm_is_the_same_at_each_of_its_temperatures() -> None:
    stray = Quantity("signal.stray light", "power", 3e-9, is_free=True, each="oven")
    train = warm_train(None).rewritten(stray)
    found = draw_truth(train, 1, given={})

    levels = truth_at_levels(train, found, OVEN_LEVELS)

    assert set(levels.values()) == {found["signal.stray light"]}
    assert len(levels) == 3
