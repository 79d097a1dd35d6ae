"""Darks by themselves: what is closed, who is asked, how often the meters dwell, and on which ranges."""

from collections.abc import Iterator
from dataclasses import replace
from datetime import UTC, datetime

import pytest
from rehearsal_cases import RECIPE
from runner_cases import FakeMeter, FakeShutter, FakeStage, fake_bench, visiting_on

from rigctl.files import parse_recipe
from rigctl.files.recipe import Dark
from rigctl.runner.bench import OpenBench
from rigctl.runner.darks import Darkness, is_by_hand, needs_hands
from rigctl.runner.person import NobodyThere
from rigctl.runner.plan import DARK_DWELLS
from rigctl.timeline import VirtualTimeline

BY_SHUTTER, BY_HAND = Dark("dark", "shutter"), Dark("dark", "hand")
BACKGROUND, ZERO = Dark("background", ""), Dark("zero", "hand")


class Somebody(NobodyThere):
    """Keeps what was asked of the person; a dark leaves every element where it is."""

    def __init__(self) -> None:
        self.asked: list[str] = []

    def block_beam(self) -> None:
        self.asked.append("block")

    def clear_beam(self) -> None:
        self.asked.append("clear")

    def cap_detectors(self) -> None:
        self.asked.append("cap")

    def uncap_detectors(self) -> None:
        self.asked.append("uncap")


@pytest.fixture
def timeline() -> Iterator[VirtualTimeline]:
    line = VirtualTimeline(datetime(2026, 1, 5, tzinfo=UTC))
    yield line
    line.stop.close()


@pytest.fixture
def bench(timeline: VirtualTimeline) -> OpenBench:
    """A shutter, a mount and a meter without a wire."""
    return fake_bench(
        timeline,
        shutter=FakeShutter(timeline),
        stages={"part mount": FakeStage(timeline)},
        meters={"signal": FakeMeter(timeline)},
    )


def darkness_on(bench: OpenBench, timeline: VirtualTimeline, person: Somebody | None = None) -> Darkness:
    visiting = visiting_on(bench, timeline)
    visiting.use_range("signal", 1e-4)
    return Darkness(bench, timeline, visiting, person or NobodyThere())


def states(bench: OpenBench) -> list[bool]:
    assert isinstance(bench.shutter, FakeShutter)
    return bench.shutter.states


def test_a_dark_closes_the_shutter_and_dwells_several_times(timeline: VirtualTimeline, bench: OpenBench) -> None:
    records = darkness_on(bench, timeline).take(BY_SHUTTER, "data", "before")

    assert states(bench) == [False]
    assert len(records) == DARK_DWELLS
    told = {(record["kind"], record["what"], record["when"], record["how"]) for record in records}
    assert told == {("dark", "dark", "before", "by shutter")}


def test_a_person_is_asked_once_for_a_block_that_stays_and_once_to_clear_it(
    timeline: VirtualTimeline, bench: OpenBench
) -> None:
    person = Somebody()
    darkness = darkness_on(bench, timeline, person)

    darkness.take(BY_HAND, "data", "after")
    darkness.take(BY_HAND, "data", "before")
    darkness.let_light_in()
    darkness.let_light_in()

    assert person.asked == ["block", "clear"]


def test_only_an_opened_shutter_counts_as_light_let_in(timeline: VirtualTimeline, bench: OpenBench) -> None:
    darkness = darkness_on(bench, timeline)

    darkness.set_shutter(is_open=False)
    before = bench.has_let_light_in
    darkness.set_shutter(is_open=True)
    darkness.set_shutter(is_open=False)

    assert not before
    assert bench.has_let_light_in


@pytest.mark.parametrize(
    ("dark", "has_shutter", "by_hand"),
    [
        (BY_HAND, True, True),
        (BY_SHUTTER, False, True),
        (BY_SHUTTER, True, False),
        (BACKGROUND, False, False),
    ],
)
def test_darks_fall_to_a_person_where_the_recipe_says_so_or_no_shutter_is_there(
    dark: Dark, has_shutter: bool, by_hand: bool
) -> None:
    recipe = replace(parse_recipe(RECIPE, "recipe.yaml"), darks=(dark,))

    assert is_by_hand(dark, has_shutter=has_shutter) == by_hand
    assert needs_hands(recipe, has_shutter=has_shutter) == by_hand


def test_a_zero_always_needs_hands() -> None:
    recipe = replace(parse_recipe(RECIPE, "recipe.yaml"), darks=(ZERO,))

    assert needs_hands(recipe, has_shutter=True)


def test_for_a_zero_the_detectors_are_capped_and_uncapped_and_the_shutter_stays(
    timeline: VirtualTimeline, bench: OpenBench
) -> None:
    person = Somebody()

    records = darkness_on(bench, timeline, person).take(ZERO, "data", "before")

    assert person.asked == ["cap", "uncap"]
    assert states(bench) == []
    assert {(record["what"], record["how"]) for record in records} == {("zero", "by hand")}


def test_for_a_background_the_way_is_open_and_shut_again_behind_it(timeline: VirtualTimeline, bench: OpenBench) -> None:
    records = darkness_on(bench, timeline).take(BACKGROUND, "data", "after")

    assert states(bench) == [True, False]
    assert {(record["what"], record["how"]) for record in records} == {("background", "source off")}


def test_a_dark_is_taken_on_every_range_that_was_read_on_and_leaves_the_meter_on_its_own(
    timeline: VirtualTimeline, bench: OpenBench
) -> None:
    darkness = darkness_on(bench, timeline)
    darkness.visiting.used_ranges_w["signal"] |= {2e-6, 2e-5}

    records = darkness.take(BY_SHUTTER, "data", "after")

    ranges = [record["detectors"]["signal"]["range_w"] for record in records]
    assert ranges == [2e-6] * DARK_DWELLS + [2e-5] * DARK_DWELLS + [2e-4] * DARK_DWELLS
    assert darkness.visiting.range_w("signal") == 2e-4


def test_each_range_settles_before_its_first_dwell(timeline: VirtualTimeline, bench: OpenBench) -> None:
    """The smallest range forgets the old level in 0.5 s, the next in 0.05 s; the recipe asks for 0.15 s at least."""
    darkness = darkness_on(bench, timeline)
    darkness.visiting.used_ranges_w["signal"] |= {2e-6, 2e-5}

    records = darkness.take(BY_SHUTTER, "data", "after")

    first_s, second_s, third_s = (records[place]["t_begin"] for place in (0, DARK_DWELLS, 2 * DARK_DWELLS))
    assert first_s == pytest.approx(9.21034 * 0.5, rel=1e-4)
    assert second_s - first_s == pytest.approx(9.21034 * 0.05, rel=1e-4)
    assert third_s - second_s == pytest.approx(0.15)


def test_meters_with_more_and_with_fewer_ranges_take_their_darks_together(timeline: VirtualTimeline) -> None:
    meters = {"signal": FakeMeter(timeline), "monitor": FakeMeter(timeline)}
    bench = fake_bench(timeline, shutter=FakeShutter(timeline), meters=meters)
    visiting = visiting_on(bench, timeline)
    visiting.use_range("signal", 1e-4)
    visiting.use_range("monitor", 1e-6)
    visiting.used_ranges_w["signal"] |= {2e-5, 2e-4}

    records = Darkness(bench, timeline, visiting, NobodyThere()).take(BY_SHUTTER, "data", "after")

    ranges = [tuple(seen["range_w"] for seen in record["detectors"].values()) for record in records]
    assert ranges == [(2e-5, 2e-6)] * DARK_DWELLS + [(2e-4, 2e-6)] * DARK_DWELLS


def test_a_timed_dark_is_due_after_its_time_and_no_sooner(timeline: VirtualTimeline, bench: OpenBench) -> None:
    darkness, timed = darkness_on(bench, timeline), replace(BY_SHUTTER, every_s=600.0)
    darkness.take(timed, "data", "before")
    ended_s = timeline.now()

    timeline.wait_until(ended_s + 599.0)
    is_early = darkness.is_due(timed)
    timeline.wait_until(ended_s + 600.0)

    assert not is_early
    assert darkness.is_due(timed)
    assert not darkness.is_due(BY_SHUTTER)


def test_a_background_does_not_put_off_a_timed_dark(timeline: VirtualTimeline, bench: OpenBench) -> None:
    darkness, timed = darkness_on(bench, timeline), replace(BY_SHUTTER, every_s=600.0)
    darkness.take(timed, "data", "before")
    timeline.wait_until(700.0)

    darkness.take(BACKGROUND, "data", "after")

    assert darkness.is_due(timed)
