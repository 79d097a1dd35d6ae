"""Are the estimates and their uncertainties honest? Many hidden truths, each fitted from its readings alone.

Seeds and bounds were set before the first run. The mean of N honest pulls has a standard deviation of
1/sqrt(N), their standard deviation one of 1/sqrt(2N).
"""

from collections.abc import Callable, Mapping

import numpy as np
import pytest
from polarimetry_cases import half_wave_case, observe, plate_case, polarizer_case, sweep, truth_of

from rigctl.optics import Train
from rigctl.polarimetry import fit

PERIODS = {"angle": 180.0, "retardance": 1.0}
MEAN_AT_500, SPREAD_AT_500 = 0.2, 0.15
Draw = Callable[[np.random.Generator], Mapping[str, float]]


def polarizer_truth(rng: np.random.Generator) -> Mapping[str, float]:
    return {
        "part.dial offset": rng.uniform(-80.0, 80.0),
        "part.extinction ratio": 10.0 ** rng.uniform(-3.5, -1.0),
    }


def plate_truth(rng: np.random.Generator) -> Mapping[str, float]:
    return {"part.dial offset": rng.uniform(-40.0, 40.0), "part.retardance": rng.uniform(0.1, 0.4)}


def half_wave_truth(rng: np.random.Generator) -> Mapping[str, float]:
    return {"part.dial offset": rng.uniform(-10.0, 10.0), "part.retardance": rng.uniform(0.46, 0.54)}


CASES: tuple[tuple[Train, Draw], ...] = (
    (polarizer_case(), polarizer_truth),
    (plate_case(), plate_truth),
    (half_wave_case(), half_wave_truth),
)
NAMES = ("polarizer", "plate between parallel polarizers", "half-wave plate before a quarter-wave plate")


def pulls(train: Train, draw: Draw, seeds: range) -> dict[str, list[float]]:
    """Differences from the truth in standard uncertainties, of every quantity that is estimated."""
    visits, found = sweep(), dict[str, list[float]]()
    for seed in seeds:
        rng = np.random.default_rng(seed)
        truth = {**truth_of(train, rng), **draw(rng)}
        for estimate in fit(train, visits, observe(train, visits, truth, rng)).estimates:
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


@pytest.mark.parametrize(("train", "draw"), CASES, ids=NAMES)
def test_sixty_truths_are_found_within_their_uncertainties(train: Train, draw: Draw) -> None:
    assert_honest(pulls(train, draw, range(60)), 60)


@pytest.mark.soak
@pytest.mark.parametrize(("train", "draw"), CASES, ids=NAMES)
def test_five_hundred_truths_are_found_within_their_uncertainties(train: Train, draw: Draw) -> None:
    assert_honest(pulls(train, draw, range(10_000, 10_500)), 500)


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
