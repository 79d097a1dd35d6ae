"""Where a fit of several levels, ranges or very many visits begins, and that no step throws it away."""

from dataclasses import replace

import numpy as np
from polarimetry_cases import (
    RANGES,
    at_ovens,
    half_wave_case,
    monitored_case,
    plate_case,
    polarizer_case,
    steps,
    sweep,
)

from rigctl.optics import Levels, Train, Visits, readings
from rigctl.polarimetry.arranging import arranged
from rigctl.polarimetry.coordinates import in_fit_forms
from rigctl.polarimetry.descent import descend
from rigctl.polarimetry.problem import Problem
from rigctl.polarimetry.start import MOST_VISITS, starts, thinned


def problem_of(train: Train, visits: Visits, truth: dict[str, float]) -> Problem:
    told = arranged(train, visits, [d.name for d in train.detectors])
    level_w = {name: np.asarray(level) for name, level in readings(told, visits, truth).items()}
    weight = {name: np.full(visits.count, 1e7) for name in level_w}
    return Problem(told, in_fit_forms(told, visits), visits, level_w, weight)


def first_start(problem: Problem) -> dict[str, float]:
    return dict(zip(problem.names, map(float, starts(problem)[0]), strict=True))


def in_steps(*labels: str) -> Visits:
    def step(k: int) -> Visits:
        return replace(sweep(), levels={"step": Levels(labels, np.full(sweep().count, k, dtype=np.intp))})

    return steps(*(step(k) for k in range(len(labels))))


def test_the_power_of_each_step_needs_no_guess() -> None:
    train = polarizer_case()
    jumpy = train.rewritten(replace(train.quantities["source.power"], each="step"))
    truth = {"source.power @ a": 0.4, "source.power @ b": 0.1, "part.dial offset": 20.0, "signal.stray light": 0.01}

    start = first_start(problem_of(jumpy, in_steps("a", "b"), truth))

    for name, value in truth.items():
        assert abs(start[name] - value) < 1e-6 * (1.0 + abs(value)), name


def test_the_stray_light_of_each_range_needs_no_guess() -> None:
    visits = sweep()
    index = (np.arange(visits.count) % 2).astype(np.intp)
    on_two = replace(visits, levels={"range of signal": Levels(RANGES, index)})
    truth = {"signal.stray light @ 2 uW": 0.03, "signal.stray light @ 1 mW": 0.07, "source.power": 1.0}

    start = first_start(problem_of(polarizer_case(), on_two, truth))

    for name, value in truth.items():
        assert abs(start[name] - value) < 1e-6, name


def test_a_drift_of_each_step_starts_near_its_own() -> None:
    train = polarizer_case()
    drifting = train.rewritten(replace(train.quantities["source.drift"], each="step"))
    truth = {"source.drift @ a": 0.1, "source.drift @ b": -0.2, "source.power": 0.5}

    start = first_start(problem_of(drifting, in_steps("a", "b"), truth))

    assert abs(start["source.drift @ a"] - 0.1) < 1e-3
    assert abs(start["source.drift @ b"] + 0.2) < 1e-3


def test_each_level_starts_in_its_own_basin() -> None:
    train = plate_case()
    apart = train.rewritten(replace(train.quantities["part.retardance"], each="oven"))
    waves = {"20 degC": 0.1, "40 degC": 0.25, "60 degC": 0.4}
    truth = {f"part.retardance @ {label}": value for label, value in waves.items()} | {"part.dial offset": 10.0}

    start = first_start(problem_of(apart, at_ovens(sweep(), 20.0, 40.0, 60.0), truth))

    for label, value in waves.items():
        assert abs(start[f"part.retardance @ {label}"] - np.cos(2.0 * np.pi * value)) < 0.35, label


def test_where_a_plate_retards_nothing_one_start_is_enough() -> None:
    # All angles are alike there: a plain of the grid, not a basin for each of its nodes.
    problem = problem_of(half_wave_case(), sweep(), {"part.dial offset": 3.0, "part.retardance": 0.49})

    at_nothing = [z for z in starts(problem) if abs((z[1] + 0.5) % 1.0 - 0.5) < 1e-9]

    assert problem.names[1] == "part.retardance"
    assert len(at_nothing) <= 1


def test_a_detector_that_sees_nothing_of_the_grid_starts_all_the_same() -> None:
    train = monitored_case().read_by(["monitor"])

    start = first_start(problem_of(train, sweep(), {"source.power": 1.2e-3, "splitter.fraction": 0.05}))

    assert abs(start["source.power"] - 1.2e-3) < 1e-6


def test_few_visits_are_all_used() -> None:
    problem = problem_of(polarizer_case(), sweep(), {})

    assert thinned(problem) is problem


def test_of_very_many_visits_some_of_each_kind_are_used() -> None:
    train = plate_case()
    apart = train.rewritten(replace(train.quantities["part.retardance"], each="oven"))
    visits = at_ovens(sweep(step_deg=0.5), 22.0, 25.0, 28.0)
    problem = problem_of(apart, visits, {})

    few = thinned(problem)

    assert few.visits.count <= MOST_VISITS < visits.count
    assert set(few.visits.levels["oven"].index) == {0, 1, 2}
    for k in range(3):  # the five darks before and after each are not lost among the others
        assert np.count_nonzero(~few.visits.is_open[few.visits.levels["oven"].index == k]) == 10
    assert few.level_w["signal"].size == few.weight["signal"].size == few.visits.count


def test_thinned_visits_do_not_fall_in_step_with_the_angles() -> None:
    problem = problem_of(polarizer_case(), sweep(step_deg=0.05), {})

    angles = thinned(problem).visits.angle_deg["part mount"]

    assert np.unique(np.round(angles % 90.0, 2)).size > 150


def test_a_start_is_worked_out_from_the_thinned_visits_alone() -> None:
    whole = problem_of(polarizer_case(), sweep(step_deg=0.1), {"part.dial offset": 33.0})
    noise_w = 1e-6 * np.random.default_rng(0).standard_normal(whole.visits.count)
    noisy = replace(whole, level_w={"signal": whole.level_w["signal"] + noise_w})

    assert np.array_equal(starts(noisy)[0], starts(thinned(noisy))[0])


def test_a_thinned_start_is_as_good() -> None:
    truth = {"part.dial offset": 33.0, "part.extinction ratio": 1e-3, "source.power": 1e-3}
    problem = problem_of(polarizer_case(), sweep(step_deg=0.1), truth)

    best = min((descend(problem, z) for z in starts(problem)), key=lambda descent: descent.chi2)

    assert best.chi2 < 1e-6


def test_no_step_throws_a_nearly_blind_angle_beyond_all_meaning() -> None:
    problem = problem_of(plate_case(), sweep(), {"part.dial offset": 3.0, "part.retardance": 0.24})
    z = problem.nominal.copy()
    z[problem.names.index("part.retardance")] = 1.0 - 1e-12  # the cosine where the plate hardly retards
    z[problem.names.index("part.dial offset")] = 30.0

    there = descend(problem, z)

    assert abs(there.z[problem.names.index("part.dial offset")]) < 3600.0
