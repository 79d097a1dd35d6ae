"""Whatever is done to a good file, reading it gives a value or tells mistakes, and does not take long."""

import time
from collections.abc import Callable
from datetime import timedelta
from typing import TypeVar

import pytest
from files_cases import DRIVERS, RECIPE, RIG, StubBench, replaced
from files_edits import edits, shuffled_lines
from full_cases import BENCH, NIGHT
from hypothesis import given, settings
from hypothesis import strategies as st

from rigctl.errors import FileError
from rigctl.files import match, parse_recipe, parse_rig
from rigctl.files.arrangement import train_of
from rigctl.files.recipe import Recipe
from rigctl.files.rig import Rig
from rigctl.plugins import find_drivers

T = TypeVar("T")

MUTATED_RECIPES = st.one_of(
    edits(RECIPE), edits(NIGHT), shuffled_lines(RECIPE), shuffled_lines(NIGHT), shuffled_lines(RIG + RECIPE), st.text()
)
MUTATED_RIGS = st.one_of(edits(RIG), shuffled_lines(RIG), shuffled_lines(RIG + RECIPE), st.text())


def outcome(read: Callable[[], T]) -> T | None:
    """Return what reading gives; None where it tells mistakes, each with its place and on one line."""
    try:
        return read()
    except FileError as error:
        mistakes = error.mistakes
    assert mistakes
    assert all(m.line >= 0 and m.column >= 0 and m.what and "\n" not in str(m) for m in mistakes)
    return None


def read_recipe(text: str) -> Recipe | None:
    return outcome(lambda: parse_recipe(text, "r.yaml"))


def read_rig(text: str) -> Rig | None:
    return outcome(lambda: parse_rig(text, "b.yaml", DRIVERS, StubBench()))


@given(text=MUTATED_RECIPES)
@settings(max_examples=400, deadline=timedelta(seconds=10))
def test_a_damaged_recipe_is_read_or_its_mistakes_are_told(text: str) -> None:
    recipe = read_recipe(text)

    if recipe is not None:
        assert all(axis.values for step in recipe.steps for axis in step.sweep)
        assert train_of(recipe).detectors
        assert recipe.optics[-1].kind == "detector"


@given(text=MUTATED_RIGS)
@settings(max_examples=400, deadline=timedelta(seconds=10))
def test_a_damaged_rig_file_is_read_or_its_mistakes_are_told(text: str) -> None:
    rig = read_rig(text)

    if rig is not None:
        assert all(rig.entry(role) is not None for role in rig.roles)


@given(text=st.one_of(edits(BENCH), shuffled_lines(BENCH)))
@settings(max_examples=200, deadline=timedelta(seconds=10))
def test_a_damaged_full_rig_file_is_read_or_its_mistakes_are_told(text: str) -> None:
    drivers = find_drivers()

    rig = outcome(lambda: parse_rig(text, "b.yaml", drivers, None))

    if rig is not None:
        assert all(diode.on in rig.instruments for diode in rig.diodes.values())


@given(recipe_text=edits(NIGHT), rig_text=edits(BENCH))
@settings(max_examples=100, deadline=timedelta(seconds=10))
def test_a_night_and_a_bench_that_can_be_read_match_or_it_is_told_why(recipe_text: str, rig_text: str) -> None:
    drivers = find_drivers()
    recipe = read_recipe(recipe_text)
    rig = outcome(lambda: parse_rig(rig_text, "b.yaml", drivers, None))

    if recipe is not None and rig is not None:
        outcome(lambda: match(recipe, rig, drivers))


@given(recipe_text=edits(RECIPE), rig_text=edits(RIG))
@settings(max_examples=100, deadline=timedelta(seconds=10))
def test_a_recipe_and_a_rig_that_can_be_read_match_or_it_is_told_why(recipe_text: str, rig_text: str) -> None:
    recipe, rig = read_recipe(recipe_text), read_rig(rig_text)

    if recipe is not None and rig is not None:
        outcome(lambda: match(recipe, rig, DRIVERS))


@pytest.mark.parametrize("text", [RECIPE, RIG])
@pytest.mark.parametrize("end", [0.1, 0.5, 0.9])
def test_a_file_cut_short_never_passes_for_a_recipe(text: str, end: float) -> None:
    with pytest.raises(FileError):
        parse_recipe(text[: int(len(text) * end)], "r.yaml")


def test_a_very_long_recipe_takes_time_in_proportion() -> None:
    count = 3000
    roles = "".join(f"  role {i}: rotation stage\n" for i in range(count))
    optics = "".join(
        f"  - polarizer: {{name: p{i}, turned by: role {i}, extinction ratio: 1000:1}}\n" for i in range(count)
    )
    sweep = "".join(f"{{role {i}: {{values: [1 deg]}}}}, " for i in range(count))
    text = replaced(
        RECIPE,
        {"roles:\n": f"roles:\n{roles}", "optics:\n": f"optics:\n{optics}", "sweep: [": f"sweep: [{sweep}"},
    )
    began = time.process_time()

    recipe = read_recipe(text)

    assert recipe is not None
    assert len(recipe.optics) == count + 3
    # checks that compare everything with everything would take over half a minute
    assert time.process_time() - began < 20.0
