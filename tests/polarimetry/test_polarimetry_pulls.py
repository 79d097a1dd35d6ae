"""Are the estimates and their uncertainties honest? Many hidden truths, each fitted from its readings alone.

Seeds and bounds were set before the first run. The mean of N honest pulls has a standard deviation of
1/sqrt(N), their standard deviation one of 1/sqrt(2N).
"""

from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np
import pytest
from polarimetry_cases import (
    FULL_SCALE_W,
    RANGES,
    at_ovens,
    empty_pair_and_three_ovens,
    empty_pair_case,
    half_wave_case,
    monitored_case,
    observe,
    on_two_ranges,
    plate_case,
    polarizer_case,
    steps,
    sweep,
    three_ovens_case,
    truth_of,
    warm_case,
    without,
)

from rigctl.optics import Train, Visits, readings
from rigctl.polarimetry import fit
from rigctl.polarimetry.arranging import arranged

PERIODS = {"angle": 180.0, "retardance": 1.0}
MEAN_AT_500, SPREAD_AT_500 = 0.2, 0.15
Truth = Mapping[str, float]


@dataclass(frozen=True)
class Case:
    """A train, what is drawn beside its tolerances, and the visits that a person would make of it."""

    train: Train
    draw: Callable[[np.random.Generator], Truth]
    visits: Callable[[Train, Truth], Visits] = lambda train, truth: sweep()


def polarizer_truth(rng: np.random.Generator) -> Truth:
    return {
        "part.dial offset": rng.uniform(-80.0, 80.0),
        "part.extinction ratio": 10.0 ** rng.uniform(-3.5, -1.0),
    }


def plate_truth(rng: np.random.Generator) -> Truth:
    return {"part.dial offset": rng.uniform(-40.0, 40.0), "part.retardance": rng.uniform(0.1, 0.4)}


def half_wave_truth(rng: np.random.Generator) -> Truth:
    return {"part.dial offset": rng.uniform(-10.0, 10.0), "part.retardance": rng.uniform(0.46, 0.54)}


def empty_pair_truth(rng: np.random.Generator) -> Truth:
    return {
        "part.dial offset": rng.uniform(-5.0, 5.0),
        "part.retardance": rng.uniform(0.15, 0.35),
        "exit cube.axis": rng.uniform(18.0, 27.0),
    }


def three_ovens_truth(rng: np.random.Generator) -> Truth:
    levels = {f"part.retardance @ {t} degC": rng.uniform(0.15, 0.35) for t in (22, 25, 28)}
    return {**levels, "part.dial offset": rng.uniform(-5.0, 5.0), "exit cube.axis": rng.uniform(18.0, 27.0)}


def warm_truth(rng: np.random.Generator) -> Truth:
    return {**half_wave_truth(rng), "part.temperature coefficient": rng.uniform(-5e-4, 5e-4)}


def monitored_truth(rng: np.random.Generator) -> Truth:
    return {**polarizer_truth(rng), "splitter.fraction": rng.uniform(0.02, 0.1)}


def two_ranges_truth(rng: np.random.Generator) -> Truth:
    strays = {f"signal.stray light @ {label}": FULL_SCALE_W * rng.uniform(0.0, 1e-4) for label in RANGES}
    gain = {"signal.gain @ 2 uW": 1.0 + 0.005 * rng.standard_normal()}
    ratio = {"part.extinction ratio": 10.0 ** rng.uniform(-5.0, -3.5)}
    offset = rng.uniform(-80.0, 80.0)
    return {**strays, **gain, **ratio, "part.dial offset": offset, "signal.stray light": 0.0}


def dim_and_bright(train: Train, truth: Truth) -> Visits:
    light_w = readings(train, sweep(step_deg=2.5), truth)["signal"]
    return on_two_ranges(sweep(step_deg=2.5), light_w)


def pair_and_plate(train: Train, truth: Truth) -> Visits:
    return steps(without(sweep(step_deg=10.0), "part"), sweep(step_deg=10.0))


CASES: Mapping[str, Case] = {
    "polarizer": Case(polarizer_case(), polarizer_truth),
    "plate between parallel polarizers": Case(plate_case(), plate_truth),
    "half-wave plate before a quarter-wave plate": Case(half_wave_case(), half_wave_truth),
    "empty pair and plate": Case(empty_pair_case(), empty_pair_truth, pair_and_plate),
    "empty pair and plate at three temperatures": Case(
        three_ovens_case(), three_ovens_truth, lambda train, truth: empty_pair_and_three_ovens()
    ),
    "plate with a temperature coefficient": Case(
        warm_case(), warm_truth, lambda train, truth: at_ovens(sweep(step_deg=10.0), 20.0, 30.0)
    ),
    "polarizer with a monitor": Case(monitored_case(), monitored_truth),
    "extinction on two ranges": Case(polarizer_case(), two_ranges_truth, dim_and_bright),
}


def pulls(case: Case, seeds: range) -> dict[str, list[float]]:
    """Differences from the truth in standard uncertainties, of every quantity that is estimated."""
    found = dict[str, list[float]]()
    for seed in seeds:
        rng = np.random.default_rng(seed)
        truth = {**truth_of(case.train, rng), **case.draw(rng)}
        visits = case.visits(case.train, truth)
        told = arranged(case.train, visits, [d.name for d in case.train.detectors])
        for estimate in fit(case.train, visits, observe(told, visits, truth, rng)).estimates:
            difference = folded(estimate.value - truth[estimate.name], PERIODS.get(estimate.kind))
            found.setdefault(estimate.name, []).append(difference / estimate.u)
    return found


def folded(difference: float, period: float | None) -> float:
    return difference if period is None else difference - period * round(difference / period)


def assert_honest(found: Mapping[str, list[float]], count: int) -> None:
    wider = np.sqrt(500.0 / count)
    for name, values in found.items():
        assert len(values) == count, f"{name} is missing from some fits"
        assert abs(np.mean(values)) < MEAN_AT_500 * wider, name
        assert abs(np.std(values) - 1.0) < SPREAD_AT_500 * wider, name
        assert np.max(np.abs(values)) < 5.0, name


@pytest.mark.parametrize("case", CASES.values(), ids=CASES)
def test_forty_truths_are_found_within_their_uncertainties(case: Case) -> None:
    assert_honest(pulls(case, range(40)), 40)


@pytest.mark.soak
@pytest.mark.parametrize("case", CASES.values(), ids=CASES)
def test_five_hundred_truths_are_found_within_their_uncertainties(case: Case) -> None:
    assert_honest(pulls(case, range(10_000, 10_500)), 500)


@pytest.mark.soak
def test_a_plate_near_half_a_wave_is_covered_by_its_interval() -> None:
    # Between parallel polarizers half a wave is an edge: the 95 % interval, not the +-, must hold the truth.
    train, visits, inside = plate_case(waves=0.5), sweep(), 0
    for seed in range(20_000, 20_500):
        rng = np.random.default_rng(seed)
        waves = rng.uniform(0.49, 0.5)
        truth = {**truth_of(train, rng), "part.dial offset": 3.0, "part.retardance": waves}
        estimate = fit(train, visits, observe(train, visits, truth, rng)).estimate("part.retardance")
        assert estimate is not None
        low, high = estimate.interval or (
            estimate.value - 1.96 * estimate.u,
            estimate.value + 1.96 * estimate.u,
        )
        inside += low <= waves <= high

    assert inside >= 0.92 * 500  # 0.95 less three standard deviations
