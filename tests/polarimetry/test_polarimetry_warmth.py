"""A plate that changes with its temperature, by a coefficient instead of a value for each level."""

from dataclasses import replace

import numpy as np
import pytest
from polarimetry_cases import (
    at_ovens,
    half_wave_case,
    observe,
    plate_case,
    quantity,
    sweep,
    truth_of,
    variances,
    warm_case,
)

from rigctl.optics import Train, Visits, readings
from rigctl.polarimetry import Estimate, Fit, fit, predict
from rigctl.polarimetry.coordinates import in_fit_forms
from rigctl.polarimetry.symmetry import symmetries

PLATE = {"part.dial offset": 2.0, "part.retardance": 0.493}


def two_ovens() -> Visits:
    return at_ovens(sweep(step_deg=10.0), 20.0, 30.0)


def warm_plate(waves: float = 0.25, *, per_k: float | None = None) -> Train:
    """A warmed plate between parallel polarizers; the coefficient is unknown unless given."""
    train = plate_case(waves=waves)
    warm = replace(train.elements[1], warmed_by="oven")
    coefficient = quantity("part.temperature coefficient", per_k or 0.0, is_unknown=per_k is None)
    elements = (train.elements[0], warm, train.elements[2])
    return Train(elements, train.detectors, {**train.quantities, coefficient.name: coefficient})


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


@pytest.mark.parametrize("per_k", [3e-4, -1e-4])
def test_a_coefficient_is_found_from_two_temperatures(per_k: float) -> None:
    truth = {**PLATE, "part.temperature coefficient": per_k}

    result = fitted(warm_case(), two_ovens(), truth)

    assert_found(result, truth)
    assert found(result, "part.temperature coefficient").u < 2e-5
    assert found(result, "part.temperature coefficient").kind == "coefficient"


def test_the_retardance_belongs_to_the_reference_temperature() -> None:
    # Read at 20 and 30 degC, stated for 25.
    truth = {**PLATE, "part.temperature coefficient": 1e-3}

    result = fitted(warm_case(), two_ovens(), truth)

    assert found(result, "part.retardance").value == pytest.approx(0.493, abs=3e-4)


def test_a_coefficient_says_what_two_levels_say() -> None:
    visits, rng = two_ovens(), np.random.default_rng(4)
    warm = warm_case()
    truth = {**truth_of(warm, rng), **PLATE, "part.temperature coefficient": 4e-4}
    seen = observe(warm, visits, truth, rng)
    bare = half_wave_case()
    levelled = bare.rewritten(replace(bare.quantities["part.retardance"], each="oven"))

    by_coefficient, by_level = fit(warm, visits, seen), fit(levelled, visits, seen)

    value, per_k = found(by_coefficient, "part.retardance").value, found(by_coefficient, "part.temperature coefficient")
    for temperature_c in (20.0, 30.0):
        level = found(by_level, f"part.retardance @ {temperature_c:g} degC")
        assert level.value == pytest.approx(value * (1.0 + per_k.value * (temperature_c - 25.0)), abs=1e-6)
    assert by_coefficient.chi2 == pytest.approx(by_level.chi2, rel=1e-6)


def test_one_temperature_does_not_tell_a_coefficient_and_a_warmer_sweep_would() -> None:
    visits = at_ovens(sweep(), 30.0)

    (refusal,) = predict(warm_case(), visits, variances(visits)).refusals

    assert refusal.names == ("part.temperature coefficient",)
    assert refusal.remedy == "Repeat the sweep with oven 5 K warmer."
    assert refusal.u_with_remedy["part.temperature coefficient"] < 1e-4


def test_five_kelvin_off_the_reference_the_retardance_bears_what_the_coefficient_may_be() -> None:
    visits = at_ovens(sweep(), 30.0)

    (retardance,) = (
        e for e in predict(warm_case(), visits, variances(visits)).estimates if e.name == "part.retardance"
    )

    assert retardance.u == pytest.approx(0.5 * 5.0 * 1e-3, rel=0.05)  # 1e-3/K is plausible for any plate


def test_at_the_reference_alone_the_retardance_is_told_all_the_same() -> None:
    visits = at_ovens(sweep(), 25.0)

    result = fitted(warm_case(), visits, PLATE)

    (refusal,) = result.refusals
    assert refusal.names == ("part.temperature coefficient",)
    assert refusal.remedy == "Repeat the sweep with oven 5 K warmer."
    assert_found(result, PLATE)


def test_a_known_coefficient_takes_a_slow_change_of_temperature_out() -> None:
    visits = sweep()
    warming = replace(visits, temperature_c={"oven": np.linspace(20.0, 40.0, visits.count)})
    truth = {"part.dial offset": 2.0, "part.retardance": 0.24}

    aware = fitted(warm_plate(per_k=1e-3), warming, truth)
    unaware = fit(plate_case(), visits, observe(warm_plate(per_k=1e-3), warming, truth, np.random.default_rng(0)))

    assert_found(aware, truth)
    assert not aware.notes
    assert "times what their scatter" in unaware.notes[0]


def test_a_coefficient_with_a_tolerance_is_a_nuisance() -> None:
    train = warm_plate().rewritten(quantity("part.temperature coefficient", 1e-3, 2e-4))
    truth = {"part.dial offset": 2.0, "part.retardance": 0.24, "part.temperature coefficient": 1.1e-3}
    visits = at_ovens(sweep(), 35.0)  # ten kelvin from where the retardance is wanted

    result = fitted(train, visits, truth)

    assert_found(result, truth)
    retardance = found(result, "part.retardance")
    assert retardance.u == pytest.approx(0.24 * 10.0 * 2e-4, rel=0.1)


def test_an_exact_coefficient_of_nought_leaves_the_cosine_form() -> None:
    visits = at_ovens(sweep(), 20.0, 30.0)

    assert in_fit_forms(warm_plate(per_k=0.0), visits).quantities["part.retardance"].kind == "cosine"
    assert in_fit_forms(warm_plate(per_k=1e-4), visits).quantities["part.retardance"].kind == "retardance"
    assert in_fit_forms(warm_plate(), visits).quantities["part.retardance"].kind == "retardance"


def test_a_reflected_retardance_takes_its_coefficient_along() -> None:
    visits, train = two_ovens(), warm_plate()
    moves = symmetries(train, visits)
    solution = {"part.retardance": 0.8, "part.temperature coefficient": 1e-3, "part.dial offset": 95.0}

    told = moves.nearest(solution)

    assert "part.retardance -> 1 - it" in moves.sentences()
    assert told["part.retardance"] == pytest.approx(0.2, abs=1e-12)
    assert told["part.temperature coefficient"] == pytest.approx(-4e-3, abs=1e-12)
    assert readings(train, visits, told)["signal"] == pytest.approx(
        readings(train, visits, solution)["signal"], abs=1e-15
    )


def test_an_order_more_takes_its_coefficient_along() -> None:
    visits, train = two_ovens(), warm_plate(11.25)
    solution = {"part.retardance": 0.24, "part.temperature coefficient": 1e-2, "part.dial offset": 1.0}

    told = symmetries(train, visits).nearest(solution)

    assert told["part.retardance"] == pytest.approx(11.24, abs=1e-12)
    assert readings(train, visits, told)["signal"] == pytest.approx(
        readings(train, visits, solution)["signal"], abs=1e-14
    )


def test_a_known_coefficient_forbids_to_reflect() -> None:
    # With two temperatures 0.75 waves and 0.25 waves of the same plate are no longer the same light.
    visits = two_ovens()

    assert symmetries(warm_plate(per_k=1e-3), visits).sentences() == ("part.dial offset + 90 deg",)
    assert "part.retardance -> 1 - it" in symmetries(warm_plate(per_k=0.0), visits).sentences()


def test_a_known_coefficient_forbids_to_change_the_order() -> None:
    solution = {"part.retardance": 0.24, "part.dial offset": 1.0}

    known = symmetries(warm_plate(11.25, per_k=1e-3), two_ovens()).nearest(solution)
    nought = symmetries(warm_plate(11.25, per_k=0.0), two_ovens()).nearest(solution)

    assert known["part.retardance"] == 0.24
    assert nought["part.retardance"] == pytest.approx(11.24, abs=1e-12)


def test_a_plate_of_many_orders_is_found_with_its_coefficient() -> None:
    # 11.25 waves at 1e-4/K: 0.011 waves from one temperature to the other.
    truth = {"part.retardance": 11.23, "part.temperature coefficient": 1.2e-4, "part.dial offset": 3.0}

    result = fitted(warm_plate(11.25), two_ovens(), truth)

    assert_found(result, truth)


def test_levels_of_the_coefficient_itself_are_allowed() -> None:
    train, visits = warm_case(), two_ovens()
    apart = train.rewritten(replace(train.quantities["part.temperature coefficient"], each="oven"))
    truth = {**PLATE, "part.temperature coefficient @ 20 degC": 2e-4, "part.temperature coefficient @ 30 degC": 3e-4}
    rng = np.random.default_rng(1)

    result = fit(apart, visits, observe(apart, visits, {**truth_of(apart, rng), **truth}, rng))

    # Three numbers for two temperatures: only combinations of them are known.
    refused = {name for refusal in result.refusals for name in refusal.names}
    assert "part.retardance" in refused or "part.temperature coefficient @ 20 degC" in refused
    assert found(result, "part.dial offset").value == pytest.approx(2.0, abs=0.5)


def test_chi_squared_is_split_by_temperature_while_there_are_few() -> None:
    truth = {**PLATE, "part.temperature coefficient": 1e-4}
    drifting = replace(sweep(), temperature_c={"oven": np.linspace(20.0, 30.0, sweep().count)})

    assert fitted(warm_case(), two_ovens(), truth).split is not None
    assert fitted(warm_case(), drifting, truth).split is None
