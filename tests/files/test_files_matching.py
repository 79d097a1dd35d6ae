"""Whether a rig can do what a recipe asks for, and what is told when it cannot."""

import pytest
from files_cases import DRIVERS, NOTHING, Changes, recipe, rig, told

from rigctl.files import match


def complaints(recipe_changes: Changes = NOTHING, rig_changes: Changes = NOTHING) -> list[str]:
    return told(lambda: match(recipe(recipe_changes), rig(rig_changes), DRIVERS))


def test_a_rig_that_fills_every_role_matches() -> None:
    match(recipe(), rig(), DRIVERS)


def test_an_optional_role_may_stay_unfilled() -> None:
    match(recipe(), rig({", shutter: shutter 1": ""}), DRIVERS)


def test_roles_that_the_recipe_does_not_have_do_no_harm() -> None:
    fewer = {"  shutter: {is: shutter, optional: true}\n": "", "dark: {by: shutter": "dark: {by: hand"}

    match(recipe(fewer), rig(), DRIVERS)


def test_a_role_that_nothing_fills_is_told_at_its_place_in_the_recipe() -> None:
    assert complaints(rig_changes={"signal: head 7, ": ""}) == [
        "r.yaml:4:3: the rig 'bench 2' fills the role 'signal' with nothing; "
        "expected a power meter for it under 'roles' in b.yaml"
    ]


def test_a_role_that_is_mistyped_in_the_rig_is_the_nearest_word() -> None:
    (line,) = complaints(rig_changes={"signal: head 7": "signall: head 7"})

    assert line.endswith("did you mean 'signall'?")


def test_an_instrument_of_the_wrong_kind_is_told_at_its_place_in_the_rig() -> None:
    swapped = {"signal: head 7": "signal: shutter 1", ", shutter: shutter 1": ""}

    assert complaints(rig_changes=swapped) == [
        "b.yaml:7:38: 'shutter 1' fills the role 'signal' but is a shutter; expected a power meter, as r.yaml asks"
    ]


def test_every_mismatch_is_told_at_once() -> None:
    lines = complaints(
        {"turn: 1": "turn: 2"}, {"signal: head 7": "monitor: head 7", "shutter: shutter 1": "x: shutter 1"}
    )

    assert [line.split(": ")[0] for line in lines] == ["r.yaml:4:3", "r.yaml:12:22"]


AXIS = "turn: 1, step: 5 deg, approach: from below"


@pytest.mark.parametrize(
    "axis",
    [
        "values: [-10 deg, 400 deg]",
        "values: [-9.8 deg, 400 deg], approach: from below",
        "values: [-10 deg, 399.8 deg], approach: from above",
    ],
)
def test_angles_up_to_the_ends_of_the_travel_are_reached(axis: str) -> None:
    match(recipe({AXIS: axis}), rig(), DRIVERS)


@pytest.mark.parametrize(
    ("axis", "furthest", "approach"),
    [
        ("values: [-10.1 deg]", "-10.1 deg", ""),
        ("values: [400.1 deg]", "400.1 deg", ""),
        ("values: [-9.9 deg], approach: from below", "-10.1 deg", "from below"),
        ("values: [399.9 deg], approach: from above", "400.1 deg", "from above"),
        ("values: [401 deg], approach: from below", "401 deg", ""),
        ("values: [-11 deg], approach: from above", "-11 deg", ""),
    ],
)
def test_an_angle_beyond_the_travel_is_told_with_the_overshoot_of_its_approach(
    axis: str, furthest: str, approach: str
) -> None:
    note = f", as its approach {approach} goes past the angle and back" if approach else ""

    assert complaints({AXIS: axis}) == [
        f"r.yaml:12:22: the mount 'part mount' would have to go to {furthest}{note}; "
        "expected angles within its travel of -10 deg to 400 deg"
    ]


def test_a_mount_without_backlash_overshoots_nothing() -> None:
    exact = {"channel: B": "channel: B, backlash: 0 deg"}

    match(recipe({AXIS: "values: [-10 deg], approach: from below"}), rig(exact), DRIVERS)


def test_an_angle_in_a_step_is_told_at_the_place_of_that_step() -> None:
    sweep = "sweep: [{part mount: {turn: 1, step: 5 deg, approach: from below, settle: 150 ms}}]"
    steps = (
        "steps:\n  - {name: near, sweep: [{part mount: {values: [0 deg]}}]}\n"
        "  - {name: far, sweep: [{part mount: {values: [1000 deg]}}]}"
    )

    (line,) = complaints({sweep: steps})

    assert line.startswith("r.yaml:14:38: the mount 'part mount' would have to go to 1000 deg")
