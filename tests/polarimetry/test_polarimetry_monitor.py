"""A pick-off with a monitor: as a detector of its own in the fit, and as the one that tells the source's power."""

from dataclasses import replace

import numpy as np
import pytest
from polarimetry_cases import (
    FULL_SCALE_W,
    monitored_case,
    observe,
    plate_case,
    polarizer_case,
    quantity,
    sweep,
    truth_of,
    variances,
)

from rigctl.errors import UndecidedError
from rigctl.optics import Quantity, Train, Visits
from rigctl.optics.kernel import Array
from rigctl.polarimetry import Estimate, Fit, Observed, fit, predict

TRUTH = {"part.dial offset": 3.0, "part.extinction ratio": 2e-3, "splitter.fraction": 0.046}


def wander(visits: Visits, seed: int, size: float = 0.02) -> Array:
    """A source that wanders slowly by so much, as one would see it in an hour."""
    walk = np.cumsum(np.random.default_rng(seed).standard_normal(visits.count))
    walk -= np.mean(walk[visits.is_open])
    return np.asarray(1.0 + size * walk / np.std(walk))


def found(result: Fit, name: str) -> Estimate:
    estimate = result.estimate(name)
    assert estimate is not None, f"{name} was not estimated: {result.refusals}"
    return estimate


def assert_found(result: Fit, truth: dict[str, float]) -> None:
    for name, value in truth.items():
        estimate = found(result, name)
        assert abs(estimate.value - value) < 4.5 * estimate.u, f"{name}: {estimate}"


def test_both_detectors_together_tell_the_fraction() -> None:
    rng, visits, train = np.random.default_rng(0), sweep(), monitored_case()

    result = fit(train, visits, observe(train, visits, {**truth_of(train, rng), **TRUTH}, rng))

    assert_found(result, TRUTH)
    assert result.dof == 2 * 82 - 7
    assert set(result.fitted_w) == {"signal", "monitor"}


def test_the_monitor_alone_does_not_tell_the_plate_behind_it() -> None:
    rng, visits, train = np.random.default_rng(0), sweep(), monitored_case()
    seen = observe(train, visits, {**truth_of(train, rng), **TRUTH}, rng)

    result = fit(train, visits, {"monitor": seen["monitor"]})

    refused = {name for refusal in result.refusals for name in refusal.names}
    assert refused == set(TRUTH)
    assert set(result.fitted_w) == {"monitor"}


def test_the_signal_alone_refuses_the_fraction_and_gives_the_rest() -> None:
    rng, visits, train = np.random.default_rng(0), sweep(), monitored_case()
    seen = observe(train, visits, {**truth_of(train, rng), **TRUTH}, rng)

    result = fit(train, visits, {"signal": seen["signal"]})

    (refusal,) = result.refusals
    assert refusal.names == ("splitter.fraction",)
    assert_found(result, {name: TRUTH[name] for name in ("part.dial offset", "part.extinction ratio")})
    assert "monitor.stray light" not in result.names


def test_a_fraction_known_beforehand_is_a_nuisance_that_stays_as_it_was() -> None:
    rng, visits = np.random.default_rng(1), sweep()
    train = monitored_case().rewritten(quantity("splitter.fraction", 0.05, 0.005))
    seen = observe(train, visits, {**truth_of(train, rng), **TRUTH}, rng)

    result = fit(train, visits, {"signal": seen["signal"]})

    assert not result.refusals
    fraction = found(result, "splitter.fraction")
    assert fraction.value == pytest.approx(0.05, abs=1e-5)
    assert fraction.u == pytest.approx(0.005, rel=1e-3)


def test_a_fraction_below_its_noise_is_given_as_it_is() -> None:
    rng, visits, train = np.random.default_rng(2), sweep(), monitored_case()

    result = fit(
        train, visits, observe(train, visits, {**truth_of(train, rng), **TRUTH, "splitter.fraction": 0.0}, rng)
    )

    fraction = found(result, "splitter.fraction")
    assert abs(fraction.value) < 4.5 * fraction.u < 1e-3


def test_no_reading_of_any_known_detector_is_undecided() -> None:
    visits = sweep()
    level = np.ones(visits.count)

    with pytest.raises(UndecidedError, match="no reading"):
        fit(polarizer_case(), visits, {"stranger": Observed(level, 0.1 * level, 5.0 * level)})


def wandering(train: Train, seed: int, **truth: float) -> tuple[Visits, dict[str, Observed], Array]:
    """A sweep with a wandering source; the visits do not know of it."""
    rng, visits = np.random.default_rng(seed), sweep()
    power = wander(visits, seed)
    named = {name.replace("_", ".", 1).replace("_", " "): value for name, value in truth.items()}
    told = replace(visits, power=power)
    return visits, observe(train, told, {**truth_of(train, rng), "source.drift": 0.0, **named}, rng), power


@pytest.mark.parametrize("seed", range(4))
def test_the_monitors_word_takes_the_wander_out(seed: int) -> None:
    train = plate_case()
    visits, seen, power = wandering(train, seed, part_retardance=0.24, part_dial_offset=3.0)

    naive, told = fit(train, visits, seen), fit(train, replace(visits, power=power), seen)

    assert_found(told, {"part.retardance": 0.24, "part.dial offset": 3.0})
    assert not [note for note in told.notes if "times what their scatter" in note]
    assert "times what their scatter" in naive.notes[0]
    assert found(naive, "part.dial offset").u > 3.0 * found(told, "part.dial offset").u


def test_with_a_monitors_word_the_drift_is_what_remains() -> None:
    train = plate_case()
    visits, seen, power = wandering(train, 5, source_drift=0.05)

    result = fit(train, replace(visits, power=power), seen)

    assert_found(result, {"source.drift": 0.05})


def test_the_size_of_the_monitors_word_is_taken_up_by_the_power() -> None:
    train = plate_case()
    visits, seen, power = wandering(train, 6)

    one = fit(train, replace(visits, power=power), seen)
    ten = fit(train, replace(visits, power=10.0 * power), seen)

    assert found(ten, "source.power").value == pytest.approx(found(one, "source.power").value / 10.0, rel=1e-6)
    assert found(ten, "part.retardance").value == pytest.approx(found(one, "part.retardance").value, abs=1e-7)


def test_chi_squared_is_split_with_the_monitors_word() -> None:
    train = plate_case()
    visits, seen, power = wandering(train, 7)

    naive, told = fit(train, visits, seen).split, fit(train, replace(visits, power=power), seen).split

    assert naive is not None
    assert told is not None
    assert naive.not_harmonics > 10.0 * naive.not_harmonics_dof
    assert told.not_harmonics < 2.0 * told.not_harmonics_dof


def test_the_prediction_reads_both_detectors() -> None:
    visits, train = sweep(), monitored_case()
    both = {**variances(visits), "monitor": variances(visits)["signal"]}

    prediction = predict(train, visits, both)

    (fraction,) = (e for e in prediction.estimates if e.name == "splitter.fraction")
    assert fraction.u < 1e-3
    assert not prediction.refusals


def test_a_monitor_alone_behind_a_known_pick_off_measures_the_power() -> None:
    rng, visits = np.random.default_rng(3), sweep()
    train = monitored_case().rewritten(
        replace(quantity("splitter.fraction", 0.05, 0.001)),
        Quantity("source.power", "power", FULL_SCALE_W, is_unknown=True),
    )
    truth = {**truth_of(train, rng), **TRUTH, "splitter.fraction": 0.05, "source.power": 1.3e-3}

    power = found(fit(train, visits, {"monitor": observe(train, visits, truth, rng)["monitor"]}), "source.power")

    assert power.is_unknown
    assert abs(power.value - 1.3e-3) < 4.5 * power.u
    assert power.u == pytest.approx(1.3e-3 * 0.001 / 0.05, rel=0.1)
