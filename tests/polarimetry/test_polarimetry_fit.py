"""What a fit says of good data, of data at an edge, and of data that do not decide."""

import json
import time
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from polarimetry_cases import (
    half_wave_case,
    observe,
    plate_case,
    polarizer_case,
    quantity,
    sweep,
    train_of,
    truth_of,
)

from rigctl.errors import UndecidedError
from rigctl.optics import Detector, Element, Quantity, Train, Visits, readings
from rigctl.polarimetry import Estimate, Fit, Observed, as_dict, fit
from rigctl.polarimetry.coordinates import estimate_of

MALUS = {"part.dial offset": 3.0, "part.extinction ratio": 2e-3}


def fitted(train: Train, visits: Visits, seed: int = 0, **changes: float) -> Fit:
    """A fit of one hidden truth; changes are named `part_retardance` for `part.retardance`."""
    rng = np.random.default_rng(seed)
    named = {name.replace("_", ".", 1).replace("_", " "): value for name, value in changes.items()}
    return fit(train, visits, observe(train, visits, {**truth_of(train, rng), **named}, rng))


def found(result: Fit, name: str) -> Estimate:
    estimate = result.estimate(name)
    assert estimate is not None, f"{name} was not estimated: {result.refusals}"
    return estimate


def noiseless(train: Train, visits: Visits, truth: dict[str, float]) -> dict[str, Observed]:
    return {
        name: Observed(level, np.zeros(visits.count), np.full(visits.count, 5.0))
        for name, level in readings(train, visits, truth).items()
    }


@settings(deadline=None, max_examples=40)
@given(offset=st.floats(-80.0, 80.0), exponent=st.floats(-3.5, -0.3), drift=st.floats(-0.2, 0.2))
def test_a_polarizer_without_noise_is_found_exactly(offset: float, exponent: float, drift: float) -> None:
    train, visits = polarizer_case(), sweep()
    truth = {"part.dial offset": offset, "part.extinction ratio": 10.0**exponent, "source.drift": drift}

    result = fit(train, visits, noiseless(train, visits, truth))

    for name, value in truth.items():
        assert found(result, name).value == pytest.approx(value, abs=1e-6), name


@settings(deadline=None, max_examples=40)
@given(offset=st.floats(-20.0, 20.0), waves=st.floats(0.41, 0.59), stray=st.floats(0.0, 1e-4))
def test_a_half_wave_plate_without_noise_is_found_exactly(offset: float, waves: float, stray: float) -> None:
    train, visits = half_wave_case(), sweep()
    truth = {"part.dial offset": offset, "part.retardance": waves, "signal.stray light": stray}

    result = fit(train, visits, noiseless(train, visits, truth))

    for name, value in truth.items():
        assert found(result, name).value == pytest.approx(value, abs=1e-6), name


@settings(deadline=None, max_examples=40)
@given(offset=st.floats(-40.0, 40.0), waves=st.floats(0.06, 0.44))
def test_a_plate_without_noise_is_found_exactly(offset: float, waves: float) -> None:
    train, visits = plate_case(), sweep()
    truth = {"part.dial offset": offset, "part.retardance": waves}

    result = fit(train, visits, noiseless(train, visits, truth))

    for name, value in truth.items():
        assert found(result, name).value == pytest.approx(value, abs=1e-6), name


@pytest.mark.parametrize("waves", [0.49, 0.51])
@pytest.mark.parametrize("offset_deg", [-8.0, 5.0])
def test_a_little_less_and_more_than_half_a_wave_are_told_apart(waves: float, offset_deg: float) -> None:
    result = fitted(half_wave_case(), sweep(), part_retardance=waves, part_dial_offset=offset_deg)

    retardance = found(result, "part.retardance")
    assert abs(retardance.value - waves) < 5.0 * retardance.u
    assert retardance.u < 1e-3
    assert found(result, "part.dial offset").value == pytest.approx(offset_deg, abs=1.0)
    assert result.equivalents == ("part.retardance -> 1 - it with part.dial offset + 90 deg",)


def test_the_dial_offset_chooses_between_fast_and_slow_axis() -> None:
    # The same light: 0.49 waves with the fast axis at 100 deg is 0.51 waves with it at 10 deg.
    slow = fitted(half_wave_case(), sweep(), part_retardance=0.49, part_dial_offset=94.0)

    assert found(slow, "part.dial offset").value == pytest.approx(4.0, abs=1.0)
    assert found(slow, "part.retardance").value == pytest.approx(0.51, abs=1e-3)


def test_a_plate_between_parallel_polarizers_has_its_symmetries_named() -> None:
    result = fitted(plate_case(), sweep(), part_retardance=0.25, part_dial_offset=2.0)

    assert result.equivalents == ("part.retardance -> 1 - it", "part.dial offset + 90 deg")


@pytest.mark.parametrize(("nominal", "expected"), [(0.25, 0.23), (0.75, 0.77), (11.25, 11.23), (2.7, 2.77)])
def test_the_retardance_nearest_to_the_nominal_one_is_told(nominal: float, expected: float) -> None:
    result = fitted(plate_case(waves=nominal), sweep(), part_retardance=0.23, part_dial_offset=1.0)

    assert found(result, "part.retardance").value == pytest.approx(expected, abs=2e-3)


def test_a_half_wave_plate_between_parallel_polarizers_is_given_as_an_interval() -> None:
    estimate = found(
        fitted(plate_case(waves=0.5), sweep(), part_retardance=0.5, part_dial_offset=1.0), "part.retardance"
    )

    assert estimate.interval is not None
    low, high = estimate.interval
    assert 0.48 < low < high == 0.5
    assert "interval" in estimate.note


@pytest.mark.parametrize("waves", [0.0, 0.5])
def test_the_uncertainty_at_an_edge_reaches_to_the_far_end_of_the_interval(waves: float) -> None:
    cosine = 1.0 if waves == 0.0 else -1.0
    asked = quantity("part.retardance", waves, is_unknown=True)

    estimate = estimate_of(asked, "cosine", value=waves, fitted=cosine, u=1e-4)

    # cos(2 pi w) = 1 - 1.96e-4 lies at w = 0.00315 waves from the edge.
    assert estimate.u == pytest.approx(0.0031511 / 1.959964, rel=1e-3)


def test_an_extinction_ratio_without_a_dark_is_refused_and_the_rest_is_given() -> None:
    result = fitted(polarizer_case(), sweep(darks=0), part_dial_offset=3.0, part_extinction_ratio=2e-3)

    (refusal,) = result.refusals
    assert refusal.names == ("part.extinction ratio",)
    assert "only a combination" in refusal.why
    assert "signal.stray light" in refusal.why
    assert refusal.remedy == "Add 10 readings with the beam blocked."
    assert 0.0 < refusal.u_with_remedy["part.extinction ratio"] < 1e-3
    assert result.estimate("part.extinction ratio") is None
    offset = found(result, "part.dial offset")
    assert abs(offset.value - 3.0) < 5.0 * offset.u < 0.1


def test_an_extinction_ratio_without_a_dark_is_given_when_the_stray_light_is_known() -> None:
    train = polarizer_case()
    known = train.rewritten(quantity_like(train, "signal.stray light", value=1e-6, u=1e-8))

    result = fitted(known, sweep(darks=0), part_dial_offset=3.0, part_extinction_ratio=2e-3)

    assert not result.refusals
    ratio = found(result, "part.extinction ratio")
    assert abs(ratio.value - 2e-3) < 5.0 * ratio.u < 1e-3


def quantity_like(train: Train, name: str, *, value: float, u: float) -> Quantity:
    return replace(train.quantities[name], value=value, u=u)


def test_an_extinction_ratio_below_the_noise_is_given_as_a_bound() -> None:
    ratio = found(
        fitted(polarizer_case(), sweep(), part_dial_offset=3.0, part_extinction_ratio=1e-6),
        "part.extinction ratio",
    )

    assert ratio.interval is not None
    assert ratio.interval[0] == 0.0
    assert ratio.value < ratio.interval[1] < ratio.value + 3.0 * ratio.u
    assert "95 % upper bound" in ratio.note


def test_the_bound_holds_the_truth_about_as_often_as_it_says() -> None:
    train, visits, held = polarizer_case(), sweep(), 0
    for seed in range(60):
        ratio = found(
            fitted(train, visits, seed, part_dial_offset=3.0, part_extinction_ratio=2e-5),
            "part.extinction ratio",
        )
        held += (ratio.interval[1] if ratio.interval else ratio.value + 1.645 * ratio.u) > 2e-5

    assert held >= 52  # 0.95 of 60 less three standard deviations


def test_readings_all_at_one_time_drop_the_drift_and_nothing_else() -> None:
    visits = sweep()
    at_once = Visits(visits.angle_deg, visits.is_open, np.zeros(visits.count))

    result = fitted(polarizer_case(), at_once, source_drift=0.0, part_dial_offset=3.0)

    assert not result.refusals
    assert "source.drift" not in result.names
    assert abs(found(result, "part.dial offset").value - 3.0) < 0.05


def test_axis_and_dial_offset_of_one_part_are_refused_together() -> None:
    train = polarizer_case().rewritten(quantity("part.axis", 0.0, is_unknown=True))

    result = fitted(train, sweep(), part_dial_offset=3.0)

    (refusal,) = result.refusals
    assert set(refusal.names) == {"part.axis", "part.dial offset"}
    assert refusal.remedy.startswith("Measure part.")
    assert found(result, "part.extinction ratio").value == pytest.approx(1e-3, abs=2e-4)


def test_visits_without_a_reading_do_not_count() -> None:
    train, visits, rng = polarizer_case(), sweep(), np.random.default_rng(4)
    (seen,) = observe(train, visits, {**truth_of(train, rng), **MALUS}, rng).values()
    power_w, n = seen.power_w.copy(), seen.n.copy()
    power_w[10:20], n[30] = np.nan, 0.0
    kept = np.isfinite(power_w) & (n > 0)

    gappy = fit(train, visits, {"signal": Observed(power_w, seen.sd_w, n)})
    short = Observed(seen.power_w[kept], seen.sd_w[kept], seen.n[kept])
    fewer = fit(train, visits.rows(kept), {"signal": short})

    assert gappy.dof == fewer.dof
    assert gappy.chi2 == pytest.approx(fewer.chi2, rel=1e-9)
    assert np.isinf(gappy.u_w["signal"][10])


def test_no_reading_at_all_is_undecided() -> None:
    visits = sweep()
    empty = np.full(visits.count, np.nan)

    with pytest.raises(UndecidedError, match="no reading"):
        fit(polarizer_case(), visits, {"signal": Observed(empty, empty, np.zeros(visits.count))})


def test_two_readings_refuse_what_they_cannot_tell() -> None:
    visits = sweep().rows(np.arange(82) < 6)  # five darks and one angle

    result = fitted(polarizer_case(), visits, part_dial_offset=3.0)

    assert {name for refusal in result.refusals for name in refusal.names} == {
        "part.dial offset",
        "part.extinction ratio",
    }


def test_scatter_beyond_that_within_a_dwell_enlarges_the_uncertainties_visibly() -> None:
    train, visits, rng = polarizer_case(), sweep(), np.random.default_rng(5)
    (seen,) = observe(train, visits, {**truth_of(train, rng), **MALUS}, rng).values()
    shaken = seen.power_w * (1.0 + 0.003 * rng.standard_normal(visits.count))

    calm = fit(train, visits, {"signal": seen})
    rough = fit(train, visits, {"signal": Observed(shaken, seen.sd_w, seen.n)})

    factor = np.sqrt(rough.chi2 / rough.dof)
    assert not calm.notes
    assert f"{factor:.2f} times" in rough.notes[0]
    assert found(rough, "part.dial offset").u > 3.0 * found(calm, "part.dial offset").u


def test_dwells_of_one_reading_are_weighed_by_the_misses_of_the_fit() -> None:
    train, visits, rng = polarizer_case(), sweep(), np.random.default_rng(6)
    (seen,) = observe(train, visits, {**truth_of(train, rng), **MALUS}, rng).values()
    single = Observed(seen.power_w, np.full(visits.count, np.nan), np.ones(visits.count))

    result = fit(train, visits, {"signal": single})

    assert "show no scatter" in result.notes[0]
    offset = found(result, "part.dial offset")
    assert 1e-3 < offset.u < 1e-1
    assert abs(offset.value - 3.0) < 5.0 * offset.u


def test_two_detectors_share_the_train_and_have_their_own_stray_light() -> None:
    train = polarizer_case()
    both = Train(
        train.elements,
        (*train.detectors, Detector("monitor")),
        {
            **train.quantities,
            "monitor.stray light": Quantity("monitor.stray light", "power", 0.0, is_free=True),
        },
    )

    result = fitted(both, sweep(), monitor_stray_light=5e-6, part_dial_offset=3.0)

    assert found(result, "monitor.stray light").value == pytest.approx(5e-6, abs=5e-7)
    assert result.split is not None
    assert result.dof == 2 * 82 - 6


def test_a_polarizer_between_others_is_found_through_the_amplitude_it_leaks() -> None:
    train = train_of(
        Element("entry cube", "polarizer"),
        Element("part", "polarizer", "part mount"),
        Element("exit cube", "polarizer"),
        given=(
            quantity("exit cube.axis", 30.0),
            quantity("part.extinction ratio", 1e-3, is_unknown=True),
            quantity("part.dial offset", 0.0, is_unknown=True),
        ),
    )

    for seed in range(20):
        result = fitted(train, sweep(), seed, part_dial_offset=12.0, part_extinction_ratio=1e-3)
        ratio, offset = found(result, "part.extinction ratio"), found(result, "part.dial offset")
        assert abs(ratio.value - 1e-3) < 4.0 * ratio.u < 2e-3
        assert abs(offset.value - 12.0) < 4.0 * offset.u


def test_chi_squared_is_split_into_noise_and_train() -> None:
    split = fitted(polarizer_case(), sweep(), part_dial_offset=3.0).split

    assert split is not None
    assert split.not_harmonics_dof == 82 - 11
    assert split.not_train_dof == 6
    assert split.not_harmonics < 120.0
    assert split.not_train < 23.0  # 99.9 % of chi-squared with 6 degrees of freedom


def test_a_wrong_train_is_told_from_noise() -> None:
    # A weak retarder nobody wrote down gives harmonics that two polarizers cannot.
    visits, rng = sweep(), np.random.default_rng(9)
    plate = plate_case()
    seen = observe(plate, visits, {**truth_of(plate, rng), "part.retardance": 0.05}, rng)

    split = fit(polarizer_case(), visits, seen).split

    assert split is not None
    assert split.not_harmonics < 2.0 * split.not_harmonics_dof
    assert split.not_train > 100.0 * split.not_train_dof


def test_a_sweep_of_as_many_angles_as_harmonics_is_not_split() -> None:
    # Five open angles fix five harmonics and a dark the stray light: only the train leaves freedom.
    result = fitted(polarizer_case(), sweep(step_deg=72.0, darks=1), part_dial_offset=3.0)

    assert result.split is None


def test_two_turning_mounts_are_not_split() -> None:
    train = polarizer_case()
    twice = Train(
        (Element("entry cube", "polarizer", "entry mount"), train.elements[1]),
        train.detectors,
        {**train.quantities, "entry cube.dial offset": quantity("entry cube.dial offset", 0.0)},
    )
    visits = sweep()
    angles = {
        "part mount": visits.angle_deg["part mount"],
        "entry mount": np.linspace(0.0, 90.0, visits.count),
    }

    result = fitted(twice, Visits(angles, visits.is_open, visits.time_h), part_dial_offset=3.0)

    assert result.split is None
    assert found(result, "part.dial offset").value == pytest.approx(3.0, abs=0.05)


def test_the_fitted_curve_and_the_weights_come_along() -> None:
    result = fitted(polarizer_case(), sweep(), part_dial_offset=3.0)

    assert result.fitted_w["signal"].shape == (82,)
    assert np.all(result.u_w["signal"] > 0.0)


def test_the_covariance_belongs_to_the_estimates() -> None:
    result = fitted(half_wave_case(), sweep(), part_retardance=0.48, part_dial_offset=3.0)

    expected = [estimate.u for estimate in result.estimates]

    assert np.sqrt(np.diag(result.covariance)) == pytest.approx(expected, rel=1e-9)


def test_a_fit_goes_into_json_whole() -> None:
    told = json.loads(json.dumps(as_dict(fitted(polarizer_case(), sweep(darks=0), part_dial_offset=3.0))))

    assert told["refusals"][0]["names"] == ["part.extinction ratio"]
    assert told["estimates"][0]["name"] == "part.dial offset"
    assert told["dof"] == 72 - 5 + 2
    assert told["chi2_split"] is None or told["chi2_split"]["not_harmonics"] > 0.0


@pytest.mark.parametrize(
    "train", [polarizer_case(), plate_case(), half_wave_case()], ids=["polarizer", "plate", "half"]
)
def test_a_fit_takes_less_than_a_glance(train: Train) -> None:
    rng, visits, spans = np.random.default_rng(2), sweep(), []
    levels = observe(train, visits, truth_of(train, rng), rng)

    for _ in range(5):
        begin = time.process_time()
        fit(train, visits, levels)
        spans.append(time.process_time() - begin)

    assert min(spans) < 0.05
