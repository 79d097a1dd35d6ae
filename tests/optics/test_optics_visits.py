"""The table of visits: its columns stay together, and its levels keep their names."""

from dataclasses import replace

import numpy as np
import pytest
from optics_cases import bench_visits, visits_at

from rigctl.errors import PlanError
from rigctl.optics import Levels, Visits


def oven(*labels: str) -> Levels:
    return Levels(tuple(dict.fromkeys(labels)), np.array([tuple(dict.fromkeys(labels)).index(one) for one in labels]))


@pytest.mark.parametrize(
    "short",
    [
        {"temperature_c": {"oven": np.zeros(2)}},
        {"present": {"part": np.ones(2, dtype=bool)}},
        {"power": np.ones(2)},
        {"levels": {"oven": Levels(("a",), np.zeros(2, dtype=int))}},
    ],
)
def test_every_column_must_be_as_long_as_the_others(short: dict[str, object]) -> None:
    with pytest.raises(PlanError, match="differ in length"):
        replace(visits_at([0.0, 1.0, 2.0]), **short)  # type: ignore[arg-type]  # each is right but for its length


def test_two_levels_of_one_name_are_refused() -> None:
    with pytest.raises(PlanError, match="two levels are called alike: a, b, a"):
        Levels(("a", "b", "a"), np.zeros(1, dtype=int))


@pytest.mark.parametrize("index", [[0, 2], [-1, 0]])
def test_a_visit_at_no_level_is_refused(index: list[int]) -> None:
    with pytest.raises(PlanError, match="not listed"):
        Levels(("a", "b"), np.array(index))


def test_no_visits_are_at_no_level() -> None:
    assert Levels((), np.zeros(0, dtype=int)).index.size == 0


def test_joined_levels_keep_their_names_in_the_order_they_come_up() -> None:
    joined = Levels.join([oven("22 degC", "25 degC"), oven("25 degC", "28 degC", "22 degC")])

    assert joined.labels == ("22 degC", "25 degC", "28 degC")
    assert [joined.labels[i] for i in joined.index] == ["22 degC", "25 degC", "25 degC", "28 degC", "22 degC"]


def test_all_columns_are_joined() -> None:
    rng = np.random.default_rng(0)
    first, second = bench_visits(rng, 5), bench_visits(rng, 7)

    joined = Visits.join(first, second)

    assert joined.count == 12
    for part, keep in ((first, np.arange(5)), (second, np.arange(5, 12))):
        assert_alike(joined.rows(keep), part)


def assert_alike(one: Visits, other: Visits) -> None:
    assert np.array_equal(one.is_open, other.is_open)
    assert np.array_equal(one.time_h, other.time_h)
    assert one.power is not None
    assert other.power is not None
    assert np.array_equal(one.power, other.power)
    for mount, column in other.angle_deg.items():
        assert np.array_equal(one.angle_deg[mount], column)
    for role, column in other.temperature_c.items():
        assert np.array_equal(one.temperature_c[role], column)
    for name, presence in other.present.items():
        assert np.array_equal(one.present[name], presence)
    for key, levels in other.levels.items():
        told = [one.levels[key].labels[i] for i in one.levels[key].index]
        assert told == [levels.labels[i] for i in levels.index]


def test_an_element_that_one_part_does_not_tell_of_was_in_the_beam_there() -> None:
    out = replace(visits_at([0.0, 1.0]), present={"part": np.array([False, False])})

    joined = Visits.join(visits_at([0.0]), out)

    assert np.array_equal(joined.present["part"], [True, False, False])


def test_a_power_that_one_part_does_not_tell_was_the_usual_one() -> None:
    told = replace(visits_at([0.0, 1.0]), power=np.array([0.9, 1.1]))

    assert Visits.join(visits_at([0.0]), visits_at([1.0])).power is None
    joined = Visits.join(visits_at([0.0]), told).power
    assert joined is not None
    assert np.array_equal(joined, [1.0, 0.9, 1.1])


@pytest.mark.parametrize("column", [{"temperature_c": {"oven": np.zeros(1)}}, {"levels": {"oven": oven("a")}}])
def test_parts_that_tell_different_things_are_not_joined(column: dict[str, object]) -> None:
    with pytest.raises(PlanError, match="same mounts, temperatures and levels"):
        Visits.join(visits_at([0.0]), replace(visits_at([0.0]), **column))  # type: ignore[arg-type]  # any column


def test_rows_may_be_chosen_by_place_and_more_than_once() -> None:
    visits = bench_visits(np.random.default_rng(1), 6)

    chosen = visits.rows(np.array([5, 0, 0]))

    assert np.array_equal(chosen.time_h, visits.time_h[[5, 0, 0]])
    assert np.array_equal(chosen.levels["oven"].index, visits.levels["oven"].index[[5, 0, 0]])
    assert np.array_equal(chosen.present["element 1"], visits.present["element 1"][[5, 0, 0]])


def test_the_middle_of_the_time_is_that_of_all_visits() -> None:
    visits = replace(visits_at([0.0, 0.0, 0.0]), time_h=np.array([1.0, 2.0, 5.0]))

    assert np.array_equal(visits.centred_h, [-2.0, -1.0, 2.0])
    assert visits.rows(np.zeros(3, dtype=bool)).centred_h.size == 0
