"""The order of visits: as written, interleaved, shuffled, there and back, repeated, in segments; and two mounts."""

from collections import Counter
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st
from night_cases import NIGHT, Wire, make_night, night
from rehearsal_cases import RECIPE, make_job
from runner_cases import SWEEP, TWO_AXES, TWO_CONTROLLERS, TWO_MOUNTS, Ear

from rigctl.files import parse_recipe
from rigctl.files.recipe import Axis, Order, Step
from rigctl.record import load_run
from rigctl.runner.plan import ordered, step_visits
from rigctl.runner.run import run_job

ORDERS = st.one_of(
    st.just(Order()),
    st.builds(Order, st.just("interleaved"), st.integers(2, 9)),
    st.builds(Order, st.just("shuffled"), st.integers(0, 2**31)),
)


def in_order(order: str, sweep: str = "[{part mount: {turn: 1, step: 30 deg}}]") -> str:
    return RECIPE.replace(SWEEP, f"steps: [{{name: data, sweep: {sweep}, order: {order}}}]")


def asked_of(path: Path, recipe: str) -> list[float]:
    """The angles of a run's visits, in the order in which they were made."""
    ear = Ear()
    assert run_job(make_job(path, recipe=recipe, wrap=ear)).exit_code == 0
    return [visit.asked["part mount"] for visit in load_run(path).attempts]


@given(count=st.integers(1, 60), order=ORDERS)
def test_every_order_visits_every_place_once(count: int, order: Order) -> None:
    assert sorted(ordered(count, order)) == list(range(count))


def test_interleaved_takes_every_third_and_then_those_between() -> None:
    assert list(ordered(8, Order("interleaved", 3))) == [0, 3, 6, 1, 4, 7, 2, 5]


def test_shuffled_is_the_same_for_one_number_and_another_for_another() -> None:
    first, again, other = (list(ordered(40, Order("shuffled", number))) for number in (7, 7, 8))

    assert first == again
    assert first not in (other, list(range(40)))


@given(sizes=st.lists(st.integers(1, 5), min_size=1, max_size=3), order=ORDERS)
def test_the_place_of_a_visit_in_the_grid_does_not_depend_on_the_order(sizes: list[int], order: Order) -> None:
    axes = tuple(Axis(f"r{place}", "angle", tuple(map(float, range(size)))) for place, size in enumerate(sizes))

    visits = list(step_visits(Step("data", axes, order)))
    as_written = list(step_visits(Step("data", axes)))

    assert sorted(visits, key=lambda visit: visit.number) == as_written
    # the slow axes keep their order whatever the last one does
    assert [visit.index[:-1] for visit in visits] == [visit.index[:-1] for visit in as_written]


@pytest.mark.parametrize("order", ["as written", "interleaved 5", "shuffled 7"])
def test_in_every_order_the_same_visits_are_measured(order: str, tmp_path: Path) -> None:
    recipe = in_order(order) if order != "as written" else RECIPE

    asked = asked_of(tmp_path / "run.h5", recipe)

    assert sorted(asked) == [30.0 * n for n in range(12)]
    (step,) = parse_recipe(recipe, "recipe.yaml").steps
    assert asked == [30.0 * place for place in ordered(12, step.order)]


@pytest.mark.parametrize("order", ["interleaved 5", "shuffled 7"])
def test_each_reading_stands_at_its_angle_in_the_grid_whatever_the_order(order: str, tmp_path: Path) -> None:
    """The light of each angle is the same in both runs, although the sources' drift and noise are not."""
    run_job(make_job(tmp_path / "a.h5", recipe=RECIPE))
    run_job(make_job(tmp_path / "b.h5", recipe=in_order(order)))

    first, second = (
        sorted(load_run(tmp_path / name).visits("data"), key=lambda visit: visit.number) for name in ("a.h5", "b.h5")
    )
    peak_w = max(max(visit.dwells["signal"].levels_w) for visit in first)
    for ours, theirs in zip(first, second, strict=True):
        assert ours.index == theirs.index
        assert ours.dwells["signal"].levels_w[0] == pytest.approx(
            theirs.dwells["signal"].levels_w[0], abs=0.02 * peak_w
        )


def test_there_and_back_visits_every_angle_from_both_sides(tmp_path: Path) -> None:
    recipe = RECIPE.replace(SWEEP, "sweep: [{part mount: {range: 0 to 90 deg, step: 30 deg, there and back: true}}]")

    asked = asked_of(tmp_path / "run.h5", recipe)

    assert asked == [0.0, 30.0, 60.0, 90.0, 60.0, 30.0, 0.0]
    assert len(load_run(tmp_path / "run.h5").visits("data")) == len(asked)


def test_segments_follow_each_other(tmp_path: Path) -> None:
    segments = "[{range: 0 to 60 deg, step: 30 deg}, {range: 80 to 100 deg, step: 5 deg}, {values: [180 deg]}]"
    recipe = RECIPE.replace(SWEEP, f"sweep: [{{part mount: {{segments: {segments}}}}}]")

    assert asked_of(tmp_path / "run.h5", recipe) == [0.0, 30.0, 60.0, 80.0, 85.0, 90.0, 95.0, 100.0, 180.0]


def test_repeats_take_each_visit_anew_without_a_move(tmp_path: Path) -> None:
    recipe = RECIPE.replace(SWEEP, "sweep: [{part mount: {values: [0 deg, 45 deg, 90 deg]}}, {repeat: 4}]")
    ear = Ear()

    assert run_job(make_job(tmp_path / "run.h5", recipe=recipe, wrap=ear)).exit_code == 0

    visits = load_run(tmp_path / "run.h5").visits("data")
    assert ear.moves() == [0.0, 45.0, 90.0]
    assert [(visit.asked["part mount"], visit.asked["repeat"]) for visit in visits] == [
        (angle, float(repeat)) for angle in (0.0, 45.0, 90.0) for repeat in range(1, 5)
    ]
    assert len({visit.dwells["signal"].levels_w for visit in visits}) == 12


def test_a_slow_repeat_goes_through_the_whole_sweep_again(tmp_path: Path) -> None:
    recipe = RECIPE.replace(SWEEP, "sweep: [{repeat: 3}, {part mount: {values: [0 deg, 45 deg]}}]")

    assert asked_of(tmp_path / "run.h5", recipe) == [0.0, 45.0] * 3


@pytest.mark.parametrize("rig", [TWO_AXES, TWO_CONTROLLERS])
def test_two_mounts_on_one_controller_or_on_two_make_the_same_visits(rig: str, tmp_path: Path) -> None:
    assert run_job(make_job(tmp_path / "run.h5", recipe=TWO_MOUNTS, rig=rig)).exit_code == 0

    visits = load_run(tmp_path / "run.h5").visits("data")
    assert [(visit.asked["analyser"], visit.asked["part mount"]) for visit in visits] == [
        (slow, fast) for slow in (0.0, 45.0, 90.0) for fast in (10.0, 50.0)
    ]
    for visit in visits:
        assert visit.read == pytest.approx(visit.asked, abs=1e-3)


def test_an_interleaved_sweep_under_a_slow_temperature_waits_for_each_temperature_once(tmp_path: Path) -> None:
    wire = Wire()

    assert run_job(make_night(tmp_path / "run.h5", NIGHT, wire=wire)).exit_code == 0

    visits = load_run(tmp_path / "run.h5").visits("plate")
    assert [value for _, value in wire.temperatures(5)] == [23.0, 26.0]
    assert Counter(visit.asked["oven"] for visit in visits) == {23.0: 12, 26.0: 12}
    in_time = sorted(visits, key=lambda visit: visit.began_s)
    assert [visit.asked["part mount"] for visit in in_time[:12]] == [
        30.0 * place for place in (0, 3, 6, 9, 1, 4, 7, 10, 2, 5, 8, 11)
    ]
    for visit in visits:
        assert visit.read["oven"] == pytest.approx(visit.asked["oven"], abs=0.05)


def test_a_step_without_an_oven_leaves_it_where_it_was(tmp_path: Path) -> None:
    steps = """steps:
  - name: warm
    sweep:
      - oven: {values: [26 degC], steady: {within: 0.05 K, for: 30 s, give up after: 20 min}}
      - part mount: {values: [0 deg]}
  - {name: later, sweep: [{part mount: {values: [0 deg, 45 deg]}}]}
"""

    assert run_job(make_night(tmp_path / "run.h5", night(steps))).exit_code == 0

    later = load_run(tmp_path / "run.h5").visits("later")
    assert [visit.conditions["oven"]["temperature_c"] for visit in later] == [pytest.approx(26.0, abs=0.05)] * 2
