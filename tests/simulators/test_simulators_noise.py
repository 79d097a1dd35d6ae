"""Private random numbers: repeatable, apart from one another, and normal."""

import itertools
import math
import statistics

from rigctl_sim.noise import generator, normals

COUNT = 20_000


def drawn(seed: int, name: str, count: int = COUNT) -> list[float]:
    return list(itertools.islice(normals(seed, name), count))


def test_the_same_seed_and_name_give_the_same_numbers() -> None:
    assert drawn(7, "head 1") == drawn(7, "head 1")


def test_another_seed_gives_other_numbers() -> None:
    assert drawn(7, "head 1", 5) != drawn(8, "head 1", 5)


def test_another_name_gives_other_numbers() -> None:
    assert drawn(7, "head 1", 5) != drawn(7, "head 2", 5)


def test_names_that_begin_alike_share_nothing() -> None:
    assert generator(7, "head").random() != generator(7, "head 1").random()


def test_two_streams_are_not_correlated() -> None:
    first, second = drawn(7, "head 1"), drawn(7, "head 2")

    # five standard errors of a correlation of zero
    assert abs(statistics.correlation(first, second)) < 5 / math.sqrt(COUNT)


def test_the_mean_is_zero_and_the_standard_deviation_one() -> None:
    numbers = drawn(11, "head 1")

    # five standard errors each
    assert abs(statistics.fmean(numbers)) < 5 / math.sqrt(COUNT)
    assert abs(statistics.stdev(numbers) - 1.0) < 5 / math.sqrt(2 * COUNT)


def test_the_numbers_are_plain_floats() -> None:
    assert {type(number) for number in drawn(7, "head 1", 10)} == {float}
