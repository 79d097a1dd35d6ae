"""The parts of a fit, one by one: weights, forms, start, descent, symmetries, chi-squared."""

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

from rigctl.optics import Element, Train, readings
from rigctl.optics.kernel import Array
from rigctl.polarimetry.coordinates import beyond_edge, in_fit_forms, to_fit, to_people, upper_bound
from rigctl.polarimetry.descent import covariance, descend
from rigctl.polarimetry.problem import Problem
from rigctl.polarimetry.results import Observed
from rigctl.polarimetry.scatter import Scatter
from rigctl.polarimetry.start import MOST_NODES, starts
from rigctl.polarimetry.symmetry import symmetries
from rigctl.polarimetry.variance import pooled_noise


def problem_of(train: Train, truth: dict[str, float]) -> Problem:
    visits = sweep()
    level_w = {name: np.asarray(level) for name, level in readings(train, visits, truth).items()}
    weight = {name: np.full(visits.count, 1e7) for name in level_w}
    return Problem(train, in_fit_forms(train, visits), visits, level_w, weight)


def dwells(mean_w: Array, sd_w: Array, count: int, seed: int) -> Observed:
    rng = np.random.default_rng(seed)
    drawn = mean_w[:, None] + sd_w[:, None] * rng.standard_normal((mean_w.size, count))
    return Observed(drawn.mean(axis=1), drawn.std(axis=1, ddof=1), np.full(mean_w.size, float(count)))


@pytest.mark.parametrize("count", [2, 4, 10])
def test_the_pooled_noise_is_that_of_the_readings(count: int) -> None:
    mean_w = np.tile(np.linspace(0.0, 1e-3, 100), 20)
    noise = pooled_noise(dwells(mean_w, np.hypot(2e-7, 1e-3 * mean_w), count, seed=1), mean_w)

    assert noise is not None
    assert noise.a_w2 == pytest.approx(4e-14, rel=0.3)
    assert noise.c == pytest.approx(1e-6, rel=0.1)


def test_constant_noise_has_no_relative_part_below_nought() -> None:
    mean_w = np.linspace(0.0, 1e-3, 60)
    for seed in range(30):
        noise = pooled_noise(dwells(mean_w, np.full(60, 1e-6), 4, seed), mean_w)
        assert noise is not None
        assert noise.c >= 0.0
        assert noise.a_w2 == pytest.approx(1e-12, rel=0.5)


def test_purely_relative_noise_keeps_a_weight_in_the_dark() -> None:
    mean_w = np.linspace(0.0, 1e-3, 60)
    noise = pooled_noise(dwells(mean_w, 1e-2 * mean_w, 4, seed=3), mean_w)

    assert noise is not None
    assert noise.variance_w2(np.zeros(1))[0] > 0.0
    assert noise.c == pytest.approx(1e-4, rel=0.3)


def test_dwells_without_scatter_have_no_noise_to_pool() -> None:
    level = np.ones(5)

    assert pooled_noise(Observed(level, np.zeros(5), np.full(5, 4.0)), level) is None
    assert pooled_noise(Observed(level, np.full(5, np.nan), np.ones(5)), level) is None


def test_a_quiet_dwell_gains_no_weight_by_its_luck() -> None:
    mean_w = np.full(40, 1e-3)
    observed = dwells(mean_w, np.full(40, 1e-6), 3, seed=5)
    noise = pooled_noise(observed, mean_w)

    assert noise is not None
    assert np.ptp(noise.variance_w2(mean_w)) == 0.0
    assert np.max(observed.sd_w) > 5.0 * np.min(observed.sd_w)


def test_the_cosine_is_fitted_where_the_sine_is_unseen() -> None:
    form = in_fit_forms(plate_case(), sweep()).quantities["part.retardance"]

    assert form.kind == "cosine"
    assert form.value == pytest.approx(0.0, abs=1e-15)


def test_the_retardance_itself_is_fitted_where_the_sine_is_seen() -> None:
    assert in_fit_forms(half_wave_case(), sweep()).quantities["part.retardance"].kind == "retardance"


def test_the_ratio_is_fitted_at_the_ends_of_the_train_and_the_leak_between() -> None:
    train = train_of(
        Element("entry cube", "polarizer"),
        Element("part", "polarizer", "part mount"),
        Element("exit cube", "polarizer"),
        given=tuple(
            quantity(f"{name}.extinction ratio", 1e-4, is_unknown=True) for name in ("entry cube", "part", "exit cube")
        ),
    )

    forms = in_fit_forms(train, sweep()).quantities

    assert forms["entry cube.extinction ratio"].kind == "ratio"
    assert forms["exit cube.extinction ratio"].kind == "ratio"
    assert (forms["part.extinction ratio"].kind, forms["part.extinction ratio"].value) == ("leak", 0.01)


@given(waves=st.floats(0.001, 0.499))
def test_a_retardance_survives_its_form(waves: float) -> None:
    value, slope = to_people("cosine", to_fit("cosine", waves))

    assert value == pytest.approx(waves, abs=1e-9)
    assert slope == pytest.approx(-1.0 / (2 * np.pi * np.sin(2 * np.pi * waves)), rel=1e-6)


@given(ratio=st.floats(1e-8, 1.0))
def test_a_ratio_survives_its_form(ratio: float) -> None:
    value, slope = to_people("leak", to_fit("leak", ratio))

    assert value == pytest.approx(ratio, rel=1e-12)
    assert slope == pytest.approx(2.0 * np.sqrt(ratio), rel=1e-12)


def test_only_a_cosine_beyond_one_and_a_ratio_below_nought_are_beyond_an_edge() -> None:
    assert beyond_edge("cosine", -1.25) == 0.25
    assert beyond_edge("ratio", -0.5) == 0.5
    assert beyond_edge("angle", -400.0) < 0.0
    assert beyond_edge("cosine", 0.9) < 0.0


@pytest.mark.parametrize(("measured", "expected"), [(-2, 1.05), (-1, 1.41), (0, 1.960), (1, 2.727), (2, 3.656)])
def test_the_upper_bound_has_its_published_values(measured: float, expected: float) -> None:
    # 95 % upper limit with a flat prior on values from 0, in standard uncertainties above 0.
    assert measured + (upper_bound(measured, 1.0) - measured) == pytest.approx(expected, abs=5e-3)


def test_the_upper_bound_is_sane_far_below_nought() -> None:
    assert 0.0 < upper_bound(-6.0, 1.0) < 0.6


@settings(deadline=None, max_examples=30)
@given(offset=st.floats(-90.0, 90.0), waves=st.floats(0.06, 0.44))
def test_the_best_start_lies_in_the_basin_of_the_truth(offset: float, waves: float) -> None:
    truth = {"part.dial offset": offset, "part.retardance": waves, "source.power": 7e-4}
    problem = problem_of(plate_case(), truth)

    best = min((descend(problem, z) for z in starts(problem)), key=lambda descent: descent.chi2)

    assert best.chi2 < 1e-6


def test_power_and_stray_light_need_no_guess_to_start() -> None:
    truth = {"source.power": 0.4, "signal.stray light": 0.01, "source.drift": 0.1, "part.dial offset": 20.0}
    problem = problem_of(polarizer_case(), truth)

    start = dict(zip(problem.names, starts(problem)[0], strict=True))

    assert start["source.power"] == pytest.approx(0.4, rel=1e-6)
    assert start["signal.stray light"] == pytest.approx(0.01, rel=1e-6)
    assert start["source.drift"] == pytest.approx(0.1, rel=1e-3)


def test_light_that_would_be_negative_starts_nowhere() -> None:
    problem = problem_of(polarizer_case(), {"part.dial offset": 30.0})

    offsets = [dict(zip(problem.names, z, strict=True))["part.dial offset"] for z in starts(problem)]

    assert offsets == [pytest.approx(30.0)]


def test_many_unknown_offsets_are_sought_near_their_nominal_values() -> None:
    mounts = [f"mount {k}" for k in range(4)]
    elements = [Element(f"plate {k}", "retarder", mount) for k, mount in enumerate(mounts)]
    given_offsets = [quantity(f"plate {k}.dial offset", 5.0 * k, 4.0, is_unknown=True) for k in range(4)]
    given_waves = [quantity(f"plate {k}.retardance", 0.2, is_unknown=True) for k in range(2)]
    train = train_of(*elements, Element("exit", "polarizer"), given=(*given_offsets, *given_waves))
    visits = sweep(step_deg=30.0)
    angles = {mount: (k + 1) * visits.angle_deg["part mount"] for k, mount in enumerate(mounts)}
    turned = type(visits)(angles, visits.is_open, visits.time_h)
    level_w = {"signal": readings(train, turned, {})["signal"]}

    problem = Problem(train, in_fit_forms(train, turned), turned, level_w, {"signal": np.full(visits.count, 1e6)})

    assert MOST_NODES < 18**4
    assert all(np.isfinite(z).all() for z in starts(problem))


def test_a_descent_that_is_at_the_bottom_stays() -> None:
    problem = problem_of(polarizer_case(), {})

    assert np.array_equal(descend(problem, problem.nominal).z, problem.nominal)


def test_a_descent_never_climbs() -> None:
    problem = problem_of(half_wave_case(), {"part.dial offset": 5.0, "part.retardance": 0.47})
    rng = np.random.default_rng(8)
    for _ in range(10):
        z = problem.nominal + problem.widths(problem.nominal) * rng.normal(0.0, 0.3, problem.nominal.size)
        residuals, _ = problem.rows(z)
        assert descend(problem, z).chi2 <= float(residuals @ residuals)


def test_the_covariance_of_a_straight_line_is_the_published_one() -> None:
    # JCGM 100:2008, annex H.3, calibration of a thermometer at 11 readings; t0 = 20 C, s = 0.0035 C.
    t = np.array([21.521, 22.012, 22.512, 23.003, 23.507, 23.999, 24.513, 25.002, 25.503, 26.010, 26.511])
    b = -1e-3 * np.array([171, 169, 166, 159, 164, 165, 156, 157, 159, 161, 160])
    design = np.stack([np.ones_like(t), t - 20.0], axis=-1)
    solution, squares, *_ = np.linalg.lstsq(design, b, rcond=None)
    s = float(np.sqrt(squares[0] / 9))

    matrix = covariance(design / s)

    assert solution == pytest.approx([-0.1712, 0.00218], abs=5e-5)
    assert np.sqrt(np.diag(matrix)) == pytest.approx([0.0028776, 0.00066794], rel=1e-4)
    assert matrix[0, 1] / np.sqrt(matrix[0, 0] * matrix[1, 1]) == pytest.approx(-0.9304296, abs=1e-6)


def test_what_is_known_beforehand_is_one_row_each() -> None:
    problem = problem_of(half_wave_case(), {})
    residuals, slopes = problem.rows(problem.nominal)

    assert residuals.size == 82 + 4
    assert slopes.shape == (86, 9)
    assert problem.dof == 82 - 5


def names(train: Train) -> tuple[str, ...]:
    return symmetries(train, sweep()).sentences()


def test_two_polarizers_have_no_symmetry_but_half_a_turn() -> None:
    assert names(polarizer_case()) == ()


def test_swapping_the_axes_of_a_half_wave_plate_is_found() -> None:
    assert names(half_wave_case()) == ("part.retardance -> 1 - it with part.dial offset + 90 deg",)


def test_a_sweep_that_sees_no_angle_finds_every_move() -> None:
    blind = train_of(
        Element("part", "retarder", "part mount"), given=(quantity("part.dial offset", 0.0, is_unknown=True),)
    )

    assert names(blind) == ("part.dial offset + 45 deg",)


@given(offset=st.floats(-400.0, 400.0), waves=st.floats(-3.0, 3.0))
def test_the_solution_told_gives_the_same_light(offset: float, waves: float) -> None:
    train, visits = half_wave_case(), sweep()
    solution = {"part.dial offset": offset, "part.retardance": waves}

    told = symmetries(train, visits).nearest(solution)

    assert readings(train, visits, told)["signal"] == pytest.approx(
        readings(train, visits, solution)["signal"], abs=1e-15
    )
    assert abs(told["part.dial offset"]) <= 90.0 + 1e-9


@pytest.mark.parametrize(("dof", "low", "high"), [(10, 2.156, 25.188), (50, 27.991, 79.490), (100, 67.328, 140.169)])
def test_the_band_of_chi_squared_is_that_of_the_tables(dof: int, low: float, high: float) -> None:
    # 0.5 % and 99.5 % points of chi-squared, any statistical table.
    band = Scatter(float(dof), dof, within_dof=1e12).band

    assert band == pytest.approx((low, high), rel=0.03)


def test_weights_from_few_readings_widen_the_band() -> None:
    narrow, wide = Scatter(80.0, 80, within_dof=1e6).band, Scatter(80.0, 80, within_dof=80.0).band

    assert wide[0] < narrow[0] < narrow[1] < wide[1]


def test_means_that_agree_too_well_are_told() -> None:
    (note,) = Scatter(20.0, 80, within_dof=400.0).notes()

    assert "not white" in note


def test_no_freedom_left_is_told() -> None:
    verdict = Scatter(0.0, 0, within_dof=10.0)

    assert verdict.growth == 1.0
    assert "nothing is left" in verdict.notes()[0]


def test_an_honest_fit_needs_no_note() -> None:
    rng, train, visits = np.random.default_rng(3), polarizer_case(), sweep()
    (observed,) = observe(train, visits, truth_of(train, rng), rng).values()

    assert Scatter(75.0, 77, within_dof=float(np.sum(observed.n - 1))).notes() == ()
