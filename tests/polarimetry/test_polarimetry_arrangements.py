"""Arrangements that people build, each fitted from its readings alone, and what their fits must say."""

import numpy as np
import pytest
from polarimetry_cases import FULL_SCALE_W, observe, quantity, sweep, train_of, truth_of, variances

from rigctl.optics import Detector, Element, Quantity, Train, Visits
from rigctl.polarimetry import Fit, fit, predict


def assert_found(result: Fit, truth: dict[str, float], *, most: float = 4.5) -> None:
    for name, value in truth.items():
        estimate = result.estimate(name)
        assert estimate is not None, f"{name} is missing: {result.refusals}"
        assert abs(estimate.value - value) < most * estimate.u, f"{name}: {estimate.value} for {value}"


def fitted(train: Train, visits: Visits, truth: dict[str, float], seed: int) -> Fit:
    rng = np.random.default_rng(seed)
    return fit(train, visits, observe(train, visits, {**truth_of(train, rng), **truth}, rng))


def crossed() -> Train:
    return train_of(
        Element("entry cube", "polarizer"),
        Element("part", "retarder", "part mount"),
        Element("exit cube", "polarizer"),
        given=(
            quantity("exit cube.axis", 90.0, 0.05),
            quantity("part.retardance", 0.25, is_unknown=True),
            quantity("part.dial offset", 0.0, 5.0, is_unknown=True),
        ),
    )


@pytest.mark.parametrize("seed", range(5))
def test_crossed_polarizers_alone_cannot_tell_retardance_from_power(seed: int) -> None:
    # Both the mean and the swing are I0 s/2 with s = sin^2(delta/2): one number for two.
    result = fitted(crossed(), sweep(), {"part.retardance": 0.262, "part.dial offset": -7.0}, seed)

    (refusal,) = result.refusals
    assert refusal.names == ("part.retardance",)
    assert refusal.why == "the sweep sees only a combination of part.retardance and source.power"
    assert refusal.remedy == "Measure source.power apart and state it with its tolerance in the recipe."
    assert_found(result, {"part.dial offset": -7.0})


@pytest.mark.parametrize("seed", range(5))
def test_crossed_polarizers_tell_the_retardance_when_the_power_is_known(seed: int) -> None:
    known = crossed().rewritten(Quantity("source.power", "power", FULL_SCALE_W, 0.01 * FULL_SCALE_W))

    result = fitted(known, sweep(), {"part.retardance": 0.262, "part.dial offset": -7.0}, seed)

    assert_found(result, {"part.retardance": 0.262, "part.dial offset": -7.0})
    assert not result.refusals


@pytest.mark.parametrize("seed", range(5))
def test_a_polarizer_turned_by_the_exit_mount_behind_a_fixed_plate(seed: int) -> None:
    train = train_of(
        Element("entry cube", "polarizer"),
        Element("plate", "retarder"),
        Element("part", "polarizer", "part mount"),
        given=(
            quantity("plate.axis", 30.0, 0.5),
            quantity("plate.retardance", 0.25, 0.01),
            quantity("part.dial offset", 0.0, is_unknown=True),
        ),
    )

    result = fitted(train, sweep(), {"part.dial offset": 4.0}, seed)

    assert_found(result, {"part.dial offset": 4.0})


@pytest.mark.parametrize("seed", range(5))
def test_a_polarizer_in_partly_polarized_light_of_the_source(seed: int) -> None:
    # The dial offset comes from the light's own azimuth: here a horizontal half-polarized source.
    quantities = {
        "part.axis": quantity("part.axis", 0.0),
        "part.extinction ratio": quantity("part.extinction ratio", 1e-3),
        "part.dial offset": quantity("part.dial offset", 0.0, is_unknown=True),
        "source.power": Quantity("source.power", "power", FULL_SCALE_W, is_free=True),
        "source.drift": Quantity("source.drift", "drift", 0.0, is_free=True),
        "signal.stray light": Quantity("signal.stray light", "power", 0.0, is_free=True),
    }
    part = Element("part", "polarizer", "part mount")
    train = Train((part,), (Detector("signal"),), quantities, source=(1.0, 0.5, 0.0, 0.0))

    result = fitted(train, sweep(), {"part.dial offset": 33.0}, seed)

    assert_found(result, {"part.dial offset": 33.0})
    assert not result.refusals


@pytest.mark.parametrize("seed", range(5))
def test_two_sweeps_of_two_mounts_find_the_plate_and_the_analyser(seed: int) -> None:
    # The cure for the blurred analyser: a turn of its own mount beside the turn of the plate.
    train = train_of(
        Element("entry cube", "polarizer"),
        Element("part", "retarder", "part mount"),
        Element("exit cube", "polarizer", "exit mount"),
        given=(
            quantity("part.retardance", 0.25, 0.02, is_unknown=True),
            quantity("part.dial offset", 0.0, 5.0, is_unknown=True),
            quantity("exit cube.dial offset", 0.0, 5.0, is_unknown=True),
        ),
    )
    plate = sweep()
    turn, still = plate.angle_deg["part mount"], np.full(plate.count, 20.0)
    first = Visits({"part mount": turn, "exit mount": 0.0 * turn}, plate.is_open, plate.time_h)
    second = Visits({"part mount": still, "exit mount": turn}, plate.is_open, plate.time_h + 0.3)
    truth = {"part.retardance": 0.243, "part.dial offset": 3.0, "exit cube.dial offset": -2.0}

    result = fitted(train, Visits.join(first, second), truth, seed)

    assert_found(result, truth)
    assert not result.refusals
    assert result.split is None


@pytest.mark.parametrize("step_deg", [10.0, 20.0, 7.3])
def test_steps_that_do_not_divide_the_turn_are_as_good(step_deg: float) -> None:
    train = train_of(
        Element("entry cube", "polarizer"),
        Element("part", "polarizer", "part mount"),
        given=(
            quantity("part.extinction ratio", 1e-3, is_unknown=True),
            quantity("part.dial offset", 0.0, is_unknown=True),
        ),
    )
    truth = {"part.extinction ratio": 5e-3, "part.dial offset": 71.0}

    assert_found(fitted(train, sweep(step_deg=step_deg), truth, seed=1), truth)


def test_a_sweep_in_the_other_direction_and_out_of_order_is_as_good() -> None:
    train = train_of(
        Element("entry cube", "polarizer"),
        Element("part", "polarizer", "part mount"),
        given=(quantity("part.dial offset", 0.0, is_unknown=True),),
    )
    visits, rng = sweep(), np.random.default_rng(2)
    order = rng.permutation(visits.count)
    shuffled = Visits({"part mount": -visits.angle_deg["part mount"][order]}, visits.is_open[order], visits.time_h)

    assert_found(fitted(train, shuffled, {"part.dial offset": -15.0}, seed=3), {"part.dial offset": -15.0})


def test_a_strong_drift_is_found_and_does_not_tilt_the_answer() -> None:
    train = train_of(
        Element("entry cube", "polarizer"),
        Element("part", "polarizer", "part mount"),
        given=(
            quantity("part.extinction ratio", 1e-3, is_unknown=True),
            quantity("part.dial offset", 0.0, is_unknown=True),
        ),
    )
    truth = {"source.drift": 0.3, "part.dial offset": 9.0, "part.extinction ratio": 2e-3}

    assert_found(fitted(train, sweep(), truth, seed=4), truth)


def test_a_plate_that_hardly_retards_hides_its_axis_but_not_itself() -> None:
    train = train_of(
        Element("entry cube", "polarizer"),
        Element("part", "retarder", "part mount"),
        Element("exit cube", "polarizer"),
        given=(
            quantity("part.retardance", 0.0, is_unknown=True),
            quantity("part.dial offset", 0.0, is_unknown=True),
        ),
    )

    result = fitted(train, sweep(), {"part.retardance": 0.0}, seed=5)

    retardance = result.estimate("part.retardance")
    assert retardance is not None
    assert retardance.interval is not None
    assert retardance.interval[0] == 0.0
    assert retardance.interval[1] < 0.02


@pytest.mark.parametrize("power_w", [1e-9, 1e-6, 10.0])
def test_the_size_of_the_power_does_not_matter(power_w: float) -> None:
    # Nominal power a thousand times off, noise in proportion: the angles come out alike.
    train = train_of(
        Element("entry cube", "polarizer"),
        Element("part", "polarizer", "part mount"),
        given=(
            quantity("part.extinction ratio", 1e-3, is_unknown=True),
            quantity("part.dial offset", 0.0, is_unknown=True),
        ),
    )
    rng, visits = np.random.default_rng(6), sweep()
    truth = {"part.dial offset": 6.0, "part.extinction ratio": 4e-3}
    (seen,) = observe(train, visits, truth, rng).values()
    factor = power_w / FULL_SCALE_W
    scaled = type(seen)(seen.power_w * factor, seen.sd_w * factor, seen.n)

    result, usual = fit(train, visits, {"signal": scaled}), fit(train, visits, {"signal": seen})

    assert_found(result, truth)
    for name in truth:
        one, other = result.estimate(name), usual.estimate(name)
        assert one is not None
        assert other is not None
        assert one.value == pytest.approx(other.value, abs=1e-3 * other.u)
        assert one.u == pytest.approx(other.u, rel=1e-3)


def test_more_readings_predict_a_better_answer() -> None:
    train = train_of(
        Element("entry cube", "polarizer"),
        Element("part", "polarizer", "part mount"),
        given=(quantity("part.dial offset", 0.0, is_unknown=True),),
    )
    coarse, fine = sweep(step_deg=20.0), sweep(step_deg=5.0)

    few = predict(train, coarse, variances(coarse)).estimates[0]
    many = predict(train, fine, variances(fine)).estimates[0]

    assert many.u == pytest.approx(few.u / 2.0, rel=0.05)
