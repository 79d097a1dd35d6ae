"""What a sweep will tell, before any light is on."""

from dataclasses import replace

import numpy as np
import pytest
from polarimetry_cases import (
    half_wave_case,
    observe,
    plate_case,
    polarizer_case,
    quantity,
    sweep,
    train_of,
    variances,
)

from rigctl.optics import Element, Quantity, Train, Visits, readings_and_slopes
from rigctl.polarimetry import Estimate, Prediction, fit, predict


def expected(prediction: Prediction, name: str) -> Estimate:
    return next(estimate for estimate in prediction.estimates if estimate.name == name)


def test_half_a_wave_is_of_second_order_between_parallel_polarizers() -> None:
    _, slopes = readings_and_slopes(plate_case(waves=0.5), sweep(), {}, ("part.retardance", "part.dial offset"))

    retardance, dial_offset = np.abs(slopes["signal"]).max(axis=0)

    assert retardance < 1e-15  # W per wave, of 1e-3 W
    assert dial_offset > 1e-5  # W per deg


def test_half_a_wave_is_of_first_order_before_a_quarter_wave_plate() -> None:
    _, slopes = readings_and_slopes(half_wave_case(), sweep(), {}, ("part.retardance", "part.dial offset"))

    retardance, dial_offset = np.abs(slopes["signal"]).max(axis=0)
    first, second = slopes["signal"].T
    correlation = first @ second / np.sqrt((first @ first) * (second @ second))

    assert retardance > 1e-3  # W per wave, of 1e-3 W
    assert dial_offset > 1e-5  # W per deg
    assert abs(correlation) < 0.1


def test_the_prediction_shows_the_edge_and_the_cure() -> None:
    visits = sweep()

    at_edge = expected(predict(plate_case(waves=0.5), visits, variances(visits)), "part.retardance")
    cured = expected(predict(half_wave_case(), visits, variances(visits)), "part.retardance")

    assert at_edge.interval is not None
    assert at_edge.interval[1] == 0.5
    assert cured.interval is None
    assert cured.u < 0.01 * at_edge.u


@pytest.mark.parametrize(
    ("train", "changes"),
    [
        (polarizer_case(), {"part.dial offset": 0.0, "part.extinction ratio": 1e-3}),
        (plate_case(), {"part.dial offset": 0.0, "part.retardance": 0.25}),
        (half_wave_case(waves=0.48), {"part.dial offset": 0.0, "part.retardance": 0.48}),
    ],
)
def test_the_prediction_is_what_the_fit_then_reports(train: Train, changes: dict[str, float]) -> None:
    # Readings drawn at the nominal values, with the variance that was predicted.
    rng, visits, per_dwell = np.random.default_rng(12), sweep(), 5
    truth = {q.name: q.value for q in train.fitted} | changes
    levels = observe(train, visits, truth, rng, per_dwell=per_dwell)
    result = fit(train, visits, levels)
    var_w2 = {name: np.square(u) for name, u in result.u_w.items()}

    prediction = predict(train, visits, var_w2)

    for estimate in result.estimates:
        assert expected(prediction, estimate.name).u == pytest.approx(estimate.u, rel=0.25), estimate.name


def test_twice_the_noise_is_twice_the_uncertainty() -> None:
    visits = sweep()

    quiet = predict(polarizer_case(), visits, variances(visits, 1e-7))
    noisy = predict(polarizer_case(), visits, variances(visits, 2e-7))

    for one, other in zip(quiet.estimates, noisy.estimates, strict=True):
        assert other.u == pytest.approx(2.0 * one.u, rel=1e-9), one.name


def test_the_dial_offset_reaches_the_bound_of_malus_law() -> None:
    # Bound for n even points and noise s on B (1 + cos 2 theta): sd = s / (B sqrt(2 n)) rad, published for
    # sinusoids; the drift is left exact, as the formula has none.
    train = polarizer_case(ratio=0.0)
    steady = train.rewritten(exact(train, "source.drift"), exact(train, "part.extinction ratio"))
    visits = sweep(darks=0)

    prediction = predict(steady, visits, variances(visits, 1e-7))

    amplitude_w = 1e-3 * (1.0 - 1e-5) / 4.0
    bound_deg = np.rad2deg(1e-7 / (amplitude_w * np.sqrt(2 * 72)))
    assert expected(prediction, "part.dial offset").u == pytest.approx(bound_deg, rel=1e-9)


def exact(train: Train, name: str) -> Quantity:
    return replace(train.quantities[name], is_free=False, is_unknown=False, u=None)


def test_a_sweep_without_a_dark_is_refused_beforehand_with_its_cure() -> None:
    visits = sweep(darks=0)

    (refusal,) = predict(polarizer_case(), visits, variances(visits)).refusals

    assert refusal.names == ("part.extinction ratio",)
    assert refusal.remedy == "Add 10 readings with the beam blocked."


def test_a_mount_that_never_turns_is_told_to_turn() -> None:
    visits = Visits({"part mount": np.full(20, 30.0)}, np.arange(20) > 4, np.linspace(0.0, 0.2, 20))

    refusals = predict(polarizer_case(), visits, variances(visits)).refusals

    remedies = {name: refusal.remedy for refusal in refusals for name in refusal.names}
    assert remedies == {
        "part.dial offset": "Add a sweep over a full turn of part mount.",
        "part.extinction ratio": "Add a sweep over a full turn of part mount.",
    }


def two_polarizers_turning() -> Train:
    return train_of(
        Element("entry cube", "polarizer"),
        Element("part", "retarder", "part mount"),
        Element("exit cube", "polarizer", "exit mount"),
        given=(
            quantity("part.retardance", 0.5, is_unknown=True),
            quantity("part.dial offset", 0.0, is_unknown=True),
            quantity("exit cube.dial offset", 0.0, is_unknown=True),
        ),
    )


def exit_sweep() -> Visits:
    visits = sweep()
    return Visits({**visits.angle_deg, "exit mount": np.zeros(visits.count)}, visits.is_open, visits.time_h)


def test_a_half_wave_plate_hides_the_zero_of_its_analyser() -> None:
    # Only the plate's offset plus half the analyser's is determined by a sweep of the plate.
    visits = exit_sweep()

    refusals = predict(two_polarizers_turning(), visits, variances(visits)).refusals

    (refusal,) = (r for r in refusals if "part.dial offset" in r.names)
    assert set(refusal.names) == {"part.dial offset", "exit cube.dial offset"}
    assert "only a combination" in refusal.why
    assert refusal.remedy == "Add a sweep over a full turn of exit mount with part out of the beam."
    assert 0.0 < refusal.u_with_remedy["part.dial offset"] < 0.01


def test_an_analyser_of_poorly_known_zero_blurs_the_dial_offset_of_the_plate() -> None:
    train = two_polarizers_turning().rewritten(quantity("exit cube.dial offset", 1.0, 0.5))
    visits = exit_sweep()

    prediction = predict(train, visits, variances(visits))

    (coupling,) = prediction.couplings
    assert (coupling.name, coupling.most_blurred_with) == ("part.dial offset", "exit cube.dial offset")
    assert coupling.u == pytest.approx(0.25, rel=0.01)  # half of the analyser's
    assert coupling.u_if_others_known < 0.01
    assert not prediction.refusals


def test_a_blurred_retardance_is_told_in_waves() -> None:
    train = two_polarizers_turning().rewritten(
        quantity("part.retardance", 0.25, is_unknown=True),
        quantity("exit cube.dial offset", 1.0, is_unknown=True),
    )
    visits = exit_sweep()

    prediction = predict(train, visits, variances(visits))

    (coupling,) = (c for c in prediction.couplings if c.name == "part.retardance")
    assert coupling.u == pytest.approx(expected(prediction, "part.retardance").u, rel=1e-9)
    (refusal,) = prediction.refusals
    assert refusal.remedy == "Add a sweep over a full turn of exit mount."


def test_a_plate_and_an_analyser_turned_in_step_are_told_to_part() -> None:
    # The analyser follows the light that a half-wave plate turns: the power never changes, and one more
    # sweep with the plate 45 deg further gives the other extreme.
    train = two_polarizers_turning().rewritten(
        quantity("part.retardance", 0.5), quantity("part.dial offset", 0.0), quantity("exit cube.axis", 20.0)
    )
    visits = exit_sweep()
    in_step = {**visits.angle_deg, "exit mount": 2.0 * visits.angle_deg["part mount"]}

    (refusal,) = predict(train, Visits(in_step, visits.is_open, visits.time_h), variances(visits)).refusals

    assert refusal.names == ("exit cube.dial offset",)
    assert "source.power" in refusal.why
    assert refusal.remedy == "Repeat the sweep with part mount 45 deg further."


def test_a_well_known_analyser_blurs_nothing() -> None:
    visits = sweep()

    assert predict(plate_case(), visits, variances(visits)).couplings == ()


def test_symmetries_are_known_before_the_sweep() -> None:
    visits = sweep()

    assert predict(plate_case(), visits, variances(visits)).equivalents == (
        "part.retardance -> 1 - it",
        "part.dial offset + 90 deg",
    )
