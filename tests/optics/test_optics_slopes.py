"""Slopes of the forward model against complex steps."""

import numpy as np
import pytest
from optics_cases import (
    assemble,
    bench_visits,
    each,
    pick_off,
    polarizer,
    random_bench,
    random_train,
    random_visits,
    retarder,
)

from rigctl.optics import Detector, Quantity, Train, Visits, readings, readings_and_slopes
from rigctl.optics.forward import coefficient_visibility
from rigctl.optics.kernel import Array

STEP = 1e-30  # complex steps lose no digits, however small


def complex_step(train: Train, visits: Visits, name: str, detector: str = "signal") -> Array:
    shifted = {name: train.quantities[name].value + 1j * STEP}
    level: Array = readings(train, visits, shifted)[detector].imag / STEP  # type: ignore[arg-type]  # complex on purpose
    return level


def assert_slopes(train: Train, visits: Visits) -> None:
    names = tuple(name for name, quantity in train.quantities.items() if quantity.each is None)
    _, slopes = readings_and_slopes(train, visits, {}, names)
    for detector in train.detectors:
        for column, name in enumerate(names):
            expected = complex_step(train, visits, name, detector.name)
            scale = max(1.0, float(np.abs(expected).max()))
            assert np.abs(slopes[detector.name][:, column] - expected).max() < 1e-12 * scale, (detector.name, name)


@pytest.mark.parametrize("seed", range(40))
def test_every_slope_of_a_random_train_is_that_of_a_complex_step(seed: int) -> None:
    rng = np.random.default_rng(seed)

    train = random_train(rng, drift_per_h=0.05, stray_w=0.01)

    assert_slopes(train, random_visits(rng))


@pytest.mark.parametrize("seed", range(30))
def test_every_slope_of_a_whole_bench_is_that_of_a_complex_step(seed: int) -> None:
    # Pick-offs, gains, warmed elements, parts taken out, a monitor's word for the power.
    rng = np.random.default_rng(seed)

    assert_slopes(random_bench(rng), bench_visits(rng))


LEVELLED = {
    "element 1.retardance": "oven",
    "element 2.extinction ratio": "step",
    "element 1.temperature coefficient": "step",
    "element 1.dial offset": "oven",
    "element 3.axis": "step",
    "pick-off 0.fraction": "oven",
    "source.power": "step",
    "source.drift": "oven",
    "signal.stray light": "range of signal",
    "signal.gain": "range of signal",
    "monitor.gain": "step",
}


@pytest.mark.parametrize("seed", range(10))
@pytest.mark.parametrize("name", LEVELLED)
def test_every_slope_at_a_level_is_that_of_a_complex_step(name: str, seed: int) -> None:
    rng = np.random.default_rng(100 + seed)
    train, visits = each(random_bench(rng), name, LEVELLED[name]), bench_visits(rng)

    assert_slopes(train.levelled(visits), visits)


def test_all_levels_together_have_the_slope_of_the_quantity_itself() -> None:
    rng = np.random.default_rng(3)
    shared, visits = random_bench(rng), bench_visits(rng)
    train = each(shared, "element 1.retardance", "oven").levelled(visits)
    names = [q.name for q in train.levels_of("element 1.retardance")]

    _, apart = readings_and_slopes(train, visits, {}, names)
    _, alike = readings_and_slopes(shared, visits, {}, ["element 1.retardance"])

    assert len(names) == 3
    for detector in alike:
        assert apart[detector].sum(axis=1) == pytest.approx(alike[detector][:, 0], abs=1e-15)
        assert np.count_nonzero(apart[detector], axis=1).max() <= 1


@pytest.mark.parametrize(("kind", "value"), [("leak", -0.2), ("ratio", 0.05), ("ratio", -0.01)])
def test_a_warmed_polarizer_has_true_slopes_in_every_form(kind: str, value: float) -> None:
    rng = np.random.default_rng(8)
    train, visits = random_bench(rng), bench_visits(rng)

    assert_slopes(train.rewritten(Quantity("element 2.extinction ratio", kind, value)), visits)


def test_levels_of_either_sign_have_true_slopes() -> None:
    rng = np.random.default_rng(9)
    train, visits = each(random_bench(rng), "element 2.extinction ratio", "step"), bench_visits(rng)
    levels = {"element 2.extinction ratio @ empty pair": -1e-3, "element 2.extinction ratio @ plate": 0.02}
    given = [Quantity(name, "ratio", value) for name, value in levels.items()]

    assert_slopes(train.rewritten(*given), visits)


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


def test_stray_light_of_one_detector_is_nothing_to_another() -> None:
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


def test_a_monitor_in_front_of_the_plate_sees_nothing_of_it() -> None:
    visits = random_visits(np.random.default_rng(6))
    plate = retarder("plate", waves=0.3, mount="part mount")
    train = assemble(
        polarizer("entry"),
        pick_off("splitter", fraction=0.1),
        plate,
        polarizer("exit", axis_deg=30.0),
        detectors=(Detector("monitor", "splitter"),),
    )

    cosine, sine = coefficient_visibility(train, visits, {}, plate[0])

    assert cosine.size == sine.size == 0


def test_what_a_detector_sees_of_an_element_is_nothing_while_that_is_out() -> None:
    rng = np.random.default_rng(4)
    train, visits = random_bench(rng), bench_visits(rng)
    is_in = visits.present["element 1"]

    cosine, _ = coefficient_visibility(train, visits, {}, train.element("element 1"))

    by_detector = cosine.reshape(-1, visits.count)  # the signal, the second one, and a monitor behind it
    assert by_detector.shape[0] == 4
    assert not by_detector[:, ~is_in].any()
    assert by_detector[:, is_in & visits.is_open].any()
