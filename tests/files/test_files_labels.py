"""Levels are called alike wherever a quantity is found anew, and steps are found in the file."""

import pytest
from files_cases import recipe
from full_cases import night

from rigctl.files.labels import STEP, level_labels, range_labels
from rigctl.files.recipe import Axis, Step


def step(*axes: Axis) -> Step:
    return Step("plate", axes)


OVEN = Axis("oven", "temperature", (22.0, 25.5))
DIODE = Axis("diode", "current", (0.034,))
MOUNT = Axis("part mount", "angle", (0.0, 5.0))
REPEAT = Axis("", "repeat", (1.0, 2.0))


@pytest.mark.parametrize(
    ("axes", "asked", "labels"),
    [
        ((MOUNT,), {"part mount": 5.0}, {STEP: "plate"}),
        ((OVEN, MOUNT), {"oven": 22.0, "part mount": 5.0}, {"oven": "22 degC", STEP: "plate"}),
        ((OVEN,), {"oven": 25.5}, {"oven": "25.5 degC", STEP: "plate"}),
        ((OVEN, DIODE), {"oven": 22.0, "diode": 0.034}, {"oven": "22 degC", "diode": "34 mA", STEP: "plate"}),
    ],
)
def test_temperatures_and_currents_are_levels_by_what_was_asked_for_and_angles_are_not(
    axes: tuple[Axis, ...], asked: dict[str, float], labels: dict[str, str]
) -> None:
    assert level_labels(step(*axes), asked) == labels


def test_a_repeat_is_no_level() -> None:
    assert level_labels(step(REPEAT), {}) == {STEP: "plate"}


def test_ranges_are_levels_of_their_detector() -> None:
    assert range_labels({"signal": 2e-4, "monitor": 2e-3}) == {
        "range of signal": "200 uW",
        "range of monitor": "2 mW",
    }


def test_no_levels_differ_only_by_what_floats_leave_behind() -> None:
    assert level_labels(step(OVEN), {"oven": 22.000000001}) == level_labels(step(OVEN), {"oven": 22.0})


def test_a_sweep_alone_stands_in_the_recipe_and_steps_in_their_list() -> None:
    assert (recipe().keys_of_step(0), night().keys_of_step(1)) == ((), ("steps", 1))


@pytest.mark.parametrize(("number", "line"), [(0, 24), (1, 27)])
def test_the_sweep_of_a_step_is_found_by_its_keys(number: int, line: int) -> None:
    whole = night()

    found, _ = whole.place(*whole.keys_of_step(number), "sweep", 0)

    assert found == line
