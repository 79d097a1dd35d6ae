"""Slopes of the forward model against complex steps."""

import numpy as np
import pytest
from optics_cases import assemble, polarizer, random_train, random_visits, retarder

from rigctl.optics import Quantity, Train, Visits, readings, readings_and_slopes
from rigctl.optics.forward import coefficient_visibility
from rigctl.optics.kernel import Array

STEP = 1e-30  # complex steps lose no digits, however small


def complex_step(train: Train, visits: Visits, name: str, detector: str = "signal") -> Array:
    shifted = {name: train.quantities[name].value + 1j * STEP}
    level: Array = readings(train, visits, shifted)[detector].imag / STEP  # type: ignore[arg-type]  # complex on purpose
    return level


def assert_slopes(train: Train, visits: Visits) -> None:
    names = train.addresses
    _, slopes = readings_and_slopes(train, visits, {}, names)
    for column, name in enumerate(names):
        expected = complex_step(train, visits, name)
        scale = max(1.0, float(np.abs(expected).max()))
        assert np.abs(slopes["signal"][:, column] - expected).max() < 1e-12 * scale, name


@pytest.mark.parametrize("seed", range(40))
def test_every_slope_of_a_random_train_is_that_of_a_complex_step(seed: int) -> None:
    rng = np.random.default_rng(seed)

    train = random_train(rng, drift_per_h=0.05, stray_w=0.01)

    assert_slopes(train, random_visits(rng))


def test_the_forms_a_fit_uses_have_true_slopes_too() -> None:
    visits = random_visits(np.random.default_rng(7))
    train = assemble(
        polarizer("entry", axis_deg=4.0),
        polarizer("middle", axis_deg=31.0),
        retarder("plate", waves=0.3, mount="part mount", dial_offset_deg=3.0),
        polarizer("exit", axis_deg=12.0),
    ).rewritten(
        Quantity("middle.extinction ratio", "leak", -0.07),
        Quantity("plate.retardance", "cosine", -0.4),
    )

    assert_slopes(train, visits)


def test_readings_come_with_the_slopes_unchanged() -> None:
    rng = np.random.default_rng(11)
    train, visits = random_train(rng, drift_per_h=0.05, stray_w=0.01), random_visits(rng)

    levels, _ = readings_and_slopes(train, visits, {}, ("source.power",))

    assert np.array_equal(levels["signal"], readings(train, visits, {})["signal"])


def test_a_negative_extinction_ratio_leaks_no_amplitude_and_keeps_its_slope() -> None:
    visits = random_visits(np.random.default_rng(3))
    train = assemble(polarizer("entry", mount="part mount"), polarizer("exit", axis_deg=20.0, ratio=-1e-3))

    assert_slopes(train, visits)


def test_stray_light_of_one_detector_is_coefficient_visibility_another() -> None:
    rng = np.random.default_rng(5)
    train = assemble(polarizer("entry", mount="part mount"), detectors=("signal", "monitor"))
    names = ("signal.stray light", "monitor.stray light")

    _, slopes = readings_and_slopes(train, random_visits(rng), {}, names)

    assert np.array_equal(slopes["signal"][0], [1.0, 0.0])
    assert np.array_equal(slopes["monitor"][0], [0.0, 1.0])


def test_a_plate_between_linear_polarizers_hides_the_sine_of_its_retardance() -> None:
    visits = random_visits(np.random.default_rng(6))
    train = assemble(
        polarizer("entry"), retarder("plate", waves=0.3, mount="part mount"), polarizer("exit", axis_deg=30.0)
    )

    cosine, sine = coefficient_visibility(train, visits, {}, train.elements[1])

    assert np.abs(cosine).max() > 0.1
    assert np.abs(sine).max() == 0.0


def test_a_quarter_wave_plate_behind_it_shows_the_sine() -> None:
    visits = random_visits(np.random.default_rng(6))
    train = assemble(
        polarizer("entry"),
        retarder("plate", waves=0.3, mount="part mount"),
        retarder("quarter", waves=0.25),
        polarizer("exit", axis_deg=22.5),
    )

    _, sine = coefficient_visibility(train, visits, {}, train.elements[1])

    assert np.abs(sine).max() > 0.1
