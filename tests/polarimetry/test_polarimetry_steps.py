"""Several steps fitted together: what one leaves blind or blurred, another cures; and what is one value for all."""

from dataclasses import replace

import numpy as np
import pytest
from polarimetry_cases import (
    at_ovens,
    empty_pair_and_three_ovens,
    empty_pair_case,
    half_wave_case,
    observe,
    plate_case,
    quantity,
    steps,
    sweep,
    three_ovens_case,
    truth_of,
    variances,
    without,
)

from rigctl.errors import PlanError
from rigctl.optics import Levels, Train, Visits
from rigctl.polarimetry import Estimate, Fit, fit, predict

PLATE = {"part.dial offset": 2.0, "part.retardance": 0.243, "exit cube.axis": 23.1}
OVENS = {f"part.retardance @ {t} degC": waves for t, waves in ((22, 0.24), (25, 0.246), (28, 0.25))}


def fitted(train: Train, visits: Visits, truth: dict[str, float], seed: int = 0) -> Fit:
    rng = np.random.default_rng(seed)
    return fit(train, visits, observe(train, visits, {**truth_of(train, rng), **truth}, rng))


def found(result: Fit, name: str) -> Estimate:
    estimate = result.estimate(name)
    assert estimate is not None, f"{name} was not estimated: {result.refusals}"
    return estimate


def assert_found(result: Fit, truth: dict[str, float]) -> None:
    for name, value in truth.items():
        estimate = found(result, name)
        assert abs(estimate.value - value) < 4.5 * estimate.u, f"{name}: {estimate}"


def pair_and_plate() -> Visits:
    return steps(without(sweep(step_deg=10.0), "part"), sweep())


@pytest.mark.parametrize("seed", range(4))
def test_a_plate_alone_does_not_part_its_offset_from_an_unknown_exit_axis(seed: int) -> None:
    result = fitted(empty_pair_case(), sweep(), PLATE, seed)

    refused = {name for refusal in result.refusals for name in refusal.names}
    assert {"part.dial offset", "exit cube.axis"} <= refused
    (cure,) = {refusal.remedy for refusal in result.refusals}
    assert cure == "Add 10 readings with part out of the beam."


@pytest.mark.parametrize("seed", range(4))
def test_an_empty_pair_cures_it(seed: int) -> None:
    result = fitted(empty_pair_case(), pair_and_plate(), PLATE, seed)

    assert_found(result, PLATE)
    assert not result.refusals
    assert found(result, "part.dial offset").u < 0.1


def test_the_cure_is_as_good_as_it_was_said_to_be() -> None:
    train, visits = empty_pair_case(), sweep()
    few = replace(visits.rows(np.full(10, 5)), time_h=np.full(10, np.median(visits.time_h)))

    (refusal,) = predict(train, visits, variances(visits)).refusals
    cured = Visits.join(visits, without(few, "part"))
    prediction = predict(train, cured, variances(cured))

    for name, u in refusal.u_with_remedy.items():
        (estimate,) = (e for e in prediction.estimates if e.name == name)
        assert estimate.u == pytest.approx(u, rel=1e-6), name


def test_the_solution_nearest_to_the_nominal_axis_is_told_and_its_mirror_image_named() -> None:
    # Turning the exit axis to the other side, and the plate with it, is the same light.
    result = fitted(empty_pair_case(), pair_and_plate(), PLATE)

    assert found(result, "exit cube.axis").value > 0.0
    (mirror,) = (sentence for sentence in result.equivalents if sentence.startswith("nearly as good"))
    assert "exit cube.axis = -23.0" in mirror or "exit cube.axis = -23.1" in mirror


def test_a_mirror_image_that_the_grid_shows_alone_is_left_for_the_side_asked_for() -> None:
    # With very different retardances the one grid for all three holds only the basin of the other side.
    truth = {
        "part.retardance @ 22 degC": 0.311,
        "part.retardance @ 25 degC": 0.288,
        "part.retardance @ 28 degC": 0.163,
        "part.dial offset": 3.886,
        "exit cube.axis": 20.036,
    }

    for seed in range(3):
        assert_found(fitted(three_ovens_case(), empty_pair_and_three_ovens(), truth, seed), truth)


def test_the_nominal_axis_chooses_the_side() -> None:
    other = empty_pair_case().rewritten(quantity("exit cube.axis", -22.5, 5.0, is_unknown=True))

    result = fitted(other, pair_and_plate(), {**PLATE, "exit cube.axis": -23.1})

    assert_found(result, {**PLATE, "exit cube.axis": -23.1})


@pytest.mark.parametrize("seed", range(3))
def test_three_temperatures_have_a_retardance_each(seed: int) -> None:
    truth = {**OVENS, "part.dial offset": 2.0, "exit cube.axis": 23.1}

    result = fitted(three_ovens_case(), empty_pair_and_three_ovens(), truth, seed)

    assert_found(result, truth)
    assert "part.retardance" not in result.names
    assert not result.refusals


def test_levels_stand_where_the_quantity_stood() -> None:
    result = fitted(three_ovens_case(), empty_pair_and_three_ovens(), OVENS)

    place = result.names.index("part.retardance @ 22 degC")
    assert result.names[place : place + 4] == (*OVENS, "part.dial offset")
    assert result.covariance.shape == (len(result.names), len(result.names))


def test_a_reflection_is_told_for_every_level() -> None:
    result = fitted(three_ovens_case(), empty_pair_and_three_ovens(), OVENS)

    assert {f"{name} -> 1 - it" for name in OVENS} <= set(result.equivalents)


def test_levels_fitted_together_share_their_offset_and_gain_by_it() -> None:
    train = plate_case()
    apart = train.rewritten(replace(train.quantities["part.retardance"], each="oven"))
    one, three = at_ovens(sweep(), 22.0), at_ovens(sweep(), 22.0, 25.0, 28.0)

    alone = found(fitted(apart, one, {"part.retardance @ 22 degC": 0.24}), "part.dial offset")
    together = found(fitted(apart, three, OVENS), "part.dial offset")

    assert together.u == pytest.approx(alone.u / np.sqrt(3.0), rel=0.15)


def test_a_level_without_a_visit_is_refused_and_the_others_are_given() -> None:
    # The night ended before the last temperature.
    train = plate_case()
    apart = train.rewritten(replace(train.quantities["part.retardance"], each="oven"))
    whole = at_ovens(sweep(), 22.0, 25.0, 28.0)
    ended = whole.rows(whole.levels["oven"].index < 2)

    result = fitted(apart, ended, OVENS)

    (refusal,) = result.refusals
    assert refusal.names == ("part.retardance @ 28 degC",)
    assert refusal.why == "the sweep does not see part.retardance @ 28 degC"
    assert refusal.remedy == "Repeat the sweep where oven is 28 degC."
    assert_found(result, {name: OVENS[name] for name in list(OVENS)[:2]})


def test_levels_far_apart_are_found_from_one_grid() -> None:
    # A plate of many orders: from one temperature to the next it passes through half of what a grid holds.
    train = half_wave_case()
    apart = train.rewritten(
        replace(quantity("part.retardance", 11.25, is_unknown=True), each="oven"),
        replace(quantity("part.dial offset", 0.0, 3.0, is_unknown=True)),
    )
    truth = {
        "part.retardance @ 20 degC": 11.05,
        "part.retardance @ 40 degC": 11.42,
        "part.retardance @ 60 degC": 11.21,
        "part.dial offset": 4.0,
    }

    result = fitted(apart, at_ovens(sweep(step_deg=10.0), 20.0, 40.0, 60.0), truth)

    assert_found(result, truth)


def test_a_dial_that_was_homed_anew_has_an_offset_each_step() -> None:
    train = plate_case()
    apart = train.rewritten(replace(train.quantities["part.dial offset"], each="step"))
    labels = ("evening", "morning")
    parts = [
        replace(sweep(), levels={"step": Levels(labels, np.full(sweep().count, k, dtype=np.intp))}) for k in range(2)
    ]
    truth = {"part.dial offset @ evening": -21.0, "part.dial offset @ morning": 30.0, "part.retardance": 0.23}

    result = fitted(apart, steps(*parts), truth)

    assert_found(result, truth)


def test_a_power_for_each_step_takes_its_jump_out() -> None:
    train = plate_case()
    jumpy = train.rewritten(replace(train.quantities["source.power"], each="step"))
    labels = ("before", "after")
    parts = [
        replace(sweep(), levels={"step": Levels(labels, np.full(sweep().count, k, dtype=np.intp))}) for k in range(2)
    ]
    truth = {
        "source.power @ before": 1e-3,
        "source.power @ after": 6e-4,
        "source.drift": 0.0,
        "part.dial offset": 3.0,
        "part.retardance": 0.22,
    }

    result = fitted(jumpy, steps(*parts), truth)

    assert_found(result, truth)
    assert not result.notes


def test_one_power_for_both_steps_is_told_to_be_wrong() -> None:
    train = plate_case()
    jumpy = train.rewritten(replace(train.quantities["source.power"], each="step"))
    labels, rng = ("before", "after"), np.random.default_rng(1)
    parts = [
        replace(sweep(), levels={"step": Levels(labels, np.full(sweep().count, k, dtype=np.intp))}) for k in range(2)
    ]
    visits = steps(*parts)
    truth = {**truth_of(jumpy, rng), "source.power @ before": 1e-3, "source.power @ after": 9e-4}

    result = fit(train, visits, observe(jumpy, visits, {**truth, "part.dial offset": 3.0}, rng))

    assert "times what their scatter" in result.notes[0]


def test_levels_that_nobody_told_are_refused_before_any_fit() -> None:
    with pytest.raises(PlanError, match="for each 'oven'"):
        predict(three_ovens_case(), sweep(), variances(sweep()))


def test_the_prediction_names_each_level() -> None:
    visits = empty_pair_and_three_ovens()

    prediction = predict(three_ovens_case(), visits, variances(visits))

    assert set(OVENS) <= {estimate.name for estimate in prediction.estimates if estimate.is_unknown}
    assert not prediction.refusals


def test_chi_squared_of_two_steps_is_split_by_step() -> None:
    result = fitted(empty_pair_case(), pair_and_plate(), PLATE)

    assert result.split is not None
    assert result.split.not_harmonics < 2.0 * result.split.not_harmonics_dof
    assert result.split.not_train < 3.0 * result.split.not_train_dof


def test_a_part_that_was_out_and_is_called_in_shows_as_a_wrong_train() -> None:
    train, visits, rng = empty_pair_case(), pair_and_plate(), np.random.default_rng(2)
    seen = observe(train, visits, {**truth_of(train, rng), **PLATE}, rng)

    split = fit(train, replace(visits, present={}), seen).split

    assert split is not None
    assert split.not_train + split.not_harmonics > 100.0 * (split.not_train_dof + split.not_harmonics_dof)
