"""Noise that all heads share: a function of time, white, repeatable, and as large as stated.

Every statistical bound below is five standard errors of what it bounds, for one seed fixed beforehand.
"""

import math
import statistics
from itertools import pairwise

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rigctl_sim.source_noise import BLOCK, CELL_S, STATED_FOR_S, SourceNoise

SD = 4e-4
COUNT = 20_000
BLOCK_S = BLOCK * CELL_S


def means(reading_s: float, *, count: int = COUNT, begin_s: float = 0.0, seed: int = 5) -> list[float]:
    noise = SourceNoise(seed, SD)
    return [noise.mean(begin_s + n * reading_s, begin_s + (n + 1) * reading_s) for n in range(count)]


def test_a_reading_of_the_stated_length_has_the_stated_standard_deviation() -> None:
    readings = means(STATED_FOR_S)

    assert statistics.stdev(readings) == pytest.approx(SD, rel=5 / math.sqrt(2 * COUNT))


def test_its_mean_is_zero() -> None:
    assert abs(statistics.fmean(means(STATED_FOR_S))) < 5 * SD / math.sqrt(COUNT)


@pytest.mark.parametrize("cells", [1, 5, 80])
def test_it_is_white(cells: int) -> None:
    """The standard deviation of a mean goes as one over the root of its length."""
    reading_s = cells * CELL_S

    spread = statistics.stdev(means(reading_s))

    assert spread == pytest.approx(SD * math.sqrt(STATED_FOR_S / reading_s), rel=5 / math.sqrt(2 * COUNT))


def test_readings_in_a_row_share_nothing() -> None:
    readings = means(STATED_FOR_S)

    assert abs(statistics.correlation(readings[1:], readings[:-1])) < 5 / math.sqrt(COUNT)


def test_readings_that_begin_within_a_cell_lose_a_twentieth_of_their_variance_at_most() -> None:
    """Half a cell at each end: the variance is 19 + 1/4 + 1/4 of 20 cells."""
    readings = means(STATED_FOR_S, begin_s=0.5 * CELL_S)

    expected = SD * math.sqrt(19.5 / 20.0)
    assert statistics.stdev(readings) == pytest.approx(expected, rel=5 / math.sqrt(2 * COUNT))


def test_half_shared_stretches_are_correlated_by_what_they_share() -> None:
    noise = SourceNoise(5, SD)
    begins = [n * STATED_FOR_S for n in range(0, 2 * COUNT, 2)]

    first = [noise.mean(begin, begin + STATED_FOR_S) for begin in begins]
    second = [noise.mean(begin + STATED_FOR_S / 2, begin + 1.5 * STATED_FOR_S) for begin in begins]

    # standard error of a correlation r: (1 - r^2)/sqrt(n)
    assert statistics.correlation(first, second) == pytest.approx(0.5, abs=5 * 0.75 / math.sqrt(COUNT))


def test_the_same_stretch_is_the_same_for_everybody() -> None:
    one, other = SourceNoise(5, SD), SourceNoise(5, SD)
    other.mean(1000.0, 1000.1)

    assert one.mean(3.2, 3.3) == other.mean(3.2, 3.3) == one.mean(3.2, 3.3)


def test_stretches_may_be_asked_for_in_any_order() -> None:
    instants = [0.013 + 7.7 * n for n in range(30)]
    forward, backward = SourceNoise(5, SD), SourceNoise(5, SD)

    there = [forward.mean(instant, instant + 0.4) for instant in instants]
    back = [backward.mean(instant, instant + 0.4) for instant in reversed(instants)]

    assert there == back[::-1]


def test_another_seed_is_another_noise() -> None:
    first, second = means(STATED_FOR_S, seed=5), means(STATED_FOR_S, seed=6)

    assert abs(statistics.correlation(first, second)) < 5 / math.sqrt(COUNT)


def test_without_noise_there_is_exactly_none() -> None:
    assert SourceNoise(5, 0.0).mean(1.0, 2.0) == 0.0


@settings(deadline=None)
@given(edges=st.lists(st.floats(0.0, 5 * BLOCK_S), min_size=3, max_size=6, unique=True))
def test_the_mean_of_a_whole_is_that_of_its_parts(edges: list[float]) -> None:
    """Also across the blocks in which it is drawn."""
    noise, edges = SourceNoise(5, SD), sorted(edges)

    parts = [noise.mean(begin, end) * (end - begin) for begin, end in pairwise(edges)]

    whole = noise.mean(edges[0], edges[-1]) * (edges[-1] - edges[0])
    assert sum(parts) == pytest.approx(whole, abs=1e-11)


def test_the_edge_of_a_block_is_no_edge_of_the_noise() -> None:
    noise = SourceNoise(5, SD)

    across = noise.mean(BLOCK_S - 2 * CELL_S, BLOCK_S + 2 * CELL_S)

    halves = noise.mean(BLOCK_S - 2 * CELL_S, BLOCK_S), noise.mean(BLOCK_S, BLOCK_S + 2 * CELL_S)
    assert across == pytest.approx(statistics.fmean(halves), rel=1e-9)
    assert halves[0] != halves[1]
