"""A detector that changes its range: stray light, noise and gain of each."""

from dataclasses import replace

import numpy as np
import pytest
from polarimetry_cases import (
    FULL_SCALE_W,
    RANGES,
    floor_w,
    monitored_case,
    observe,
    on_two_ranges,
    plate_case,
    polarizer_case,
    sweep,
    truth_of,
    variances,
)

from rigctl.optics import Levels, Quantity, Train, Visits, readings
from rigctl.polarimetry import Estimate, Fit, Observed, fit, predict
from rigctl.polarimetry.arranging import GAIN_U, arranged
from rigctl.polarimetry.scatter import scatter
from rigctl.polarimetry.variance import reading_variances

TRUTH = {
    "source.power": FULL_SCALE_W,
    "part.dial offset": 3.0,
    "part.extinction ratio": 5e-5,
    "signal.stray light @ 2 uW": 4e-9,
    "signal.stray light @ 1 mW": 3e-7,
}


def dim_and_bright(ratio: float = 5e-5) -> Visits:
    bare = sweep(step_deg=2.5)
    nominal = {"part.dial offset": 3.0, "part.extinction ratio": ratio, "source.power": FULL_SCALE_W}
    return on_two_ranges(bare, readings(polarizer_case(), bare, nominal)["signal"])


def fitted(train: Train, visits: Visits, truth: dict[str, float], seed: int = 0) -> Fit:
    rng = np.random.default_rng(seed)
    told = arranged(train, visits, ["signal"])
    return fit(train, visits, observe(told, visits, {**truth_of(told, rng), **truth}, rng))


def found(result: Fit, name: str) -> Estimate:
    estimate = result.estimate(name)
    assert estimate is not None, f"{name} was not estimated: {result.refusals}"
    return estimate


def lit(labels: tuple[str, ...], index: list[int]) -> Visits:
    """Visits with the beam open on these ranges."""
    n = len(index)
    ranges = {"range of signal": Levels(labels, np.array(index))}
    return Visits({"part mount": np.linspace(0.0, 350.0, n)}, np.ones(n, dtype=bool), np.zeros(n), levels=ranges)


def test_each_range_has_its_stray_light_and_all_but_one_a_gain() -> None:
    train = arranged(polarizer_case(), lit(("a", "b", "c"), [0, 1, 1, 1, 2]), ["signal"])

    names = [q.name for q in train.fitted if q.name.startswith("signal")]

    assert names == [
        "signal.stray light @ a",
        "signal.stray light @ b",
        "signal.stray light @ c",
        "signal.gain @ a",
        "signal.gain @ c",
    ]
    gain = train.quantities["signal.gain @ a"]
    assert (gain.kind, gain.value, gain.u, gain.is_unknown) == ("gain", 1.0, GAIN_U, False)


def test_the_reference_is_the_range_with_most_lit_visits() -> None:
    visits = lit(RANGES, [0, 0, 0, 0, 0, 1, 1, 1])
    blocked = replace(visits, is_open=np.array([False] * 3 + [True] * 5))

    train = arranged(polarizer_case(), blocked, ["signal"])

    assert [q.name for q in train.fitted if q.kind == "gain"] == ["signal.gain @ 2 uW"]


def test_a_range_that_only_saw_the_dark_has_no_gain() -> None:
    visits = replace(lit(RANGES, [0, 0, 1, 1]), is_open=np.array([True, True, False, False]))

    train = arranged(polarizer_case(), visits, ["signal"])

    assert not [q for q in train.fitted if q.kind == "gain"]
    assert [q.name for q in train.fitted if q.kind == "power"] == [
        "source.power",
        "signal.stray light @ 2 uW",
        "signal.stray light @ 1 mW",
    ]


def test_one_range_changes_nothing() -> None:
    train = polarizer_case()

    assert arranged(train, lit(RANGES, [1, 1, 1]), ["signal"]) == train


def test_what_a_recipe_says_of_stray_light_holds_on_each_range() -> None:
    train = polarizer_case().rewritten(Quantity("signal.stray light", "power", 1e-6, 2e-7))

    told = arranged(train, lit(RANGES, [0, 1]), ["signal"])

    assert [(q.value, q.prior_u) for q in told.levels_of("signal.stray light")] == [(1e-6, 2e-7)] * 2


def test_a_gain_that_is_known_is_left_alone() -> None:
    known = Quantity("signal.gain", "gain", 1.01, each="range of signal")

    told = arranged(polarizer_case().rewritten(known), lit(RANGES, [0, 1]), ["signal"])

    assert [(q.value, q.is_fitted) for q in told.levels_of("signal.gain")] == [(1.01, False)] * 2


def test_a_detector_that_was_not_read_is_left_out() -> None:
    told = arranged(monitored_case(), sweep(), ["signal"])

    assert [d.name for d in told.detectors] == ["signal"]
    assert "splitter.fraction" in {q.name for q in told.fitted}
    assert "monitor.stray light" not in told.quantities


@pytest.mark.parametrize("seed", range(4))
def test_a_small_extinction_ratio_is_resolved_on_the_sensitive_range(seed: int) -> None:
    result = fitted(polarizer_case(), dim_and_bright(), TRUTH, seed)

    ratio = found(result, "part.extinction ratio")
    assert abs(ratio.value - 5e-5) < 4.5 * ratio.u
    assert ratio.u < 1e-6
    for label in RANGES:
        stray = found(result, f"signal.stray light @ {label}")
        assert abs(stray.value - TRUTH[stray.name]) < 4.5 * stray.u
    assert not result.refusals


def test_chi_squared_is_split_with_the_stray_light_of_each_range() -> None:
    split = fitted(polarizer_case(), dim_and_bright(), {**TRUTH, "signal.stray light @ 1 mW": 1e-5}).split

    assert split is not None
    assert split.not_harmonics < 2.0 * split.not_harmonics_dof
    assert split.not_train < 3.0 * split.not_train_dof


def test_flanks_on_the_sensitive_range_tell_its_gain() -> None:
    gain = found(fitted(polarizer_case(), dim_and_bright(), TRUTH), "signal.gain @ 2 uW")

    assert gain.u < 0.1 * GAIN_U
    assert not gain.is_unknown


def test_a_null_alone_on_the_sensitive_range_is_no_better_than_the_gain_is_known() -> None:
    bare, truth = sweep(step_deg=10.0), {**TRUTH, "part.dial offset": 0.0}
    visits = on_two_ranges(bare, readings(polarizer_case(), bare, {"part.extinction ratio": 5e-5})["signal"])

    result = fitted(polarizer_case(), visits, truth)

    gain, ratio = found(result, "signal.gain @ 2 uW"), found(result, "part.extinction ratio")
    assert gain.u == pytest.approx(GAIN_U, rel=0.01)
    assert ratio.u > 0.9 * GAIN_U * ratio.value


def test_a_sensitive_range_keeps_the_weight_of_its_own_noise() -> None:
    visits = dim_and_bright()

    result = fitted(polarizer_case(), visits, TRUTH)

    dim = (visits.levels["range of signal"].index == 0) & ~visits.is_open
    bright = (visits.levels["range of signal"].index == 1) & ~visits.is_open
    assert result.u_w["signal"][dim].max() < 1e-9
    assert result.u_w["signal"][bright].min() > 1e-8


def test_a_range_without_a_dark_blurs_the_ratio_and_asks_for_it() -> None:
    visits = dim_and_bright()
    undarkened = visits.rows(visits.is_open | (visits.levels["range of signal"].index == 1))

    prediction = predict(polarizer_case(), undarkened, {"signal": floor_w(undarkened, "signal") ** 2})

    (coupling,) = prediction.couplings
    assert (coupling.name, coupling.most_blurred_with) == ("part.extinction ratio", "signal.stray light @ 2 uW")
    assert coupling.remedy == "Add 10 readings with the beam blocked on each range."
    assert coupling.u_with_remedy is not None
    assert coupling.u_with_remedy < coupling.u / 10.0


def test_no_dark_at_all_is_asked_for_on_each_range() -> None:
    visits = dim_and_bright()

    (refusal,) = predict(polarizer_case(), visits.rows(visits.is_open), variances(visits.rows(visits.is_open))).refusals

    assert refusal.names == ("part.extinction ratio",)
    assert refusal.remedy == "Add 10 readings with the beam blocked on each range."


def test_the_prediction_has_the_ranges_too() -> None:
    visits = dim_and_bright()

    prediction = predict(polarizer_case(), visits, {"signal": floor_w(visits, "signal") ** 2})

    names = [estimate.name for estimate in prediction.estimates]
    assert names[-3:] == ["signal.stray light @ 2 uW", "signal.stray light @ 1 mW", "signal.gain @ 2 uW"]


def test_a_prediction_without_the_monitor_leaves_its_pick_off_in_the_way() -> None:
    visits = sweep()
    train = monitored_case()

    prediction = predict(train, visits, variances(visits))

    (refusal,) = prediction.refusals
    assert refusal.names == ("splitter.fraction",)
    assert "source.power" in refusal.why


def test_each_range_has_the_noise_of_its_own_dwells() -> None:
    rng, visits = np.random.default_rng(0), lit(RANGES, [0, 1] * 200)
    sd_w = floor_w(visits, "signal")
    drawn = 1e-6 + sd_w[:, None] * rng.standard_normal((400, 5))
    observed = Observed(drawn.mean(axis=1), drawn.std(axis=1, ddof=1), np.full(400, 5.0))

    variance_w2 = reading_variances(observed, observed.power_w, visits.levels["range of signal"])

    assert variance_w2[0::2] == pytest.approx(np.full(200, 4e-20), rel=0.2)
    assert variance_w2[1::2] == pytest.approx(np.full(200, 4e-14), rel=0.2)


def test_a_range_without_scatter_is_told() -> None:
    visits, n = lit(RANGES, [0, 1] * 20), 40
    sd_w = np.where(np.arange(n) % 2, 1e-7, 0.0)
    observed = Observed(np.full(n, 1e-6), sd_w, np.full(n, 5.0))

    verdict = scatter(30.0, 35, {"signal": observed}, visits)

    assert verdict.silent == ("signal",)
    assert "signal show no scatter" in verdict.notes()[0]
    assert np.isnan(reading_variances(observed, observed.power_w, visits.levels["range of signal"])[::2]).all()


def test_one_range_of_many_labels_is_one_noise() -> None:
    rng, visits = np.random.default_rng(1), lit(RANGES, [1] * 100)
    drawn = rng.standard_normal((100, 4))
    observed = Observed(drawn.mean(axis=1), drawn.std(axis=1, ddof=1), np.full(100, 4.0))

    with_label = reading_variances(observed, observed.power_w, visits.levels["range of signal"])

    assert np.array_equal(with_label, reading_variances(observed, observed.power_w, None))


def test_two_detectors_change_their_ranges_apart() -> None:
    visits = sweep()
    index = (np.arange(visits.count) % 2).astype(np.intp)
    levels = {"range of signal": Levels(RANGES, index), "range of monitor": Levels(RANGES, 1 - index)}

    told = arranged(monitored_case(), replace(visits, levels=levels), ["signal", "monitor"])

    gains = {q.name for q in told.fitted if q.kind == "gain"}
    assert len(gains) == 2
    assert {name.partition(".")[0] for name in gains} == {"signal", "monitor"}


def test_the_ranges_of_a_plate_sweep_do_not_hide_the_plate() -> None:
    bare, rng = sweep(), np.random.default_rng(3)
    train = plate_case()
    truth = {**truth_of(train, rng), "part.dial offset": 3.0, "part.retardance": 0.24}
    visits = on_two_ranges(bare, readings(train, bare, truth)["signal"] - 3e-4)  # switched far up

    told = arranged(train, visits, ["signal"])
    strays = {f"signal.stray light @ {label}": 1e-7 for label in RANGES}
    result = fit(train, visits, observe(told, visits, {**truth, **strays, "signal.gain @ 2 uW": 1.004}, rng))

    retardance, gain = found(result, "part.retardance"), result.estimate("signal.gain @ 2 uW")
    assert abs(retardance.value - 0.24) < 4.5 * retardance.u
    assert gain is None or gain.u < GAIN_U  # the curve itself tells how well the ranges agree
