"""Whether a rig reaches the temperatures, currents and readings of a whole night, and what is told when not."""

import pytest
from files_cases import NOTHING, Changes, told
from full_cases import bench, night

from rigctl.files import match
from rigctl.plugins import find_drivers

DIODES = (
    "diodes:\n  D-118: {on: source 1, limits: {current: 45 mA, power: 40 mW, compliance: 2.5 V, "
    "temperature: 10 degC to 40 degC}, class on label: 3B}\n"
)
OVEN = "{values: [22 degC, 25 degC, 28 degC]"


def complaints(recipe_changes: Changes = NOTHING, rig_changes: Changes = NOTHING) -> list[str]:
    return told(lambda: match(night(recipe_changes), bench(rig_changes), find_drivers()))


def test_the_night_fits_the_bench() -> None:
    match(night(), bench(), find_drivers())


def test_a_source_without_a_diode_has_unknown_limits() -> None:
    assert complaints(rig_changes={DIODES: ""}) == [
        "b.yaml:10:53: no diode stands on 'source 1', so its limits are not known; "
        "expected an entry under 'diodes' with 'on: source 1' and its limits"
    ]


def test_two_roles_of_one_recipe_need_two_instruments() -> None:
    assert complaints(rig_changes={"signal: head 7,": "signal: head 7, monitor: head 7,"}) == [
        "b.yaml:12:55: 'head 7' fills the role 'signal' already; expected one role each, as n.yaml needs both"
    ]


@pytest.mark.parametrize(
    ("old", "new", "place", "what"),
    [
        (OVEN, "{values: [22 degC, 81 degC]", "27:15", "'oven' would have to go to 81 degC"),
        (OVEN, "{values: [4 degC, 22 degC]", "27:15", "'oven' would have to go to 4 degC"),
        ("to: 24 degC", "to: 80.5 degC", "19:21", "'diode tec' would have to go to 80.5 degC"),
    ],
)
def test_a_temperature_beyond_the_plant_is_told(old: str, new: str, place: str, what: str) -> None:
    assert complaints({old: new}) == [
        f"n.yaml:{place}: {what}; expected temperatures within its span of 5 degC to 80 degC"
    ]


@pytest.mark.parametrize("ends", ["[5 degC, 80 degC]", "[80 degC]"])
def test_temperatures_up_to_the_ends_of_the_span_are_reached(ends: str) -> None:
    match(night({"[22 degC, 25 degC, 28 degC]": ends}), bench(), find_drivers())


def test_a_current_beyond_the_source_is_told() -> None:
    assert complaints({"to: 34 mA": "to: 201 mA"}) == [
        "n.yaml:20:21: 'diode' would have to go to 201 mA; expected at most 200 mA, which is all that it can drive"
    ]


@pytest.mark.parametrize(
    ("written", "reading", "ends"),
    [
        ("{time: 60 s, at least: 4 readings}", "15 s", "1 ms to 10 s"),
        ("{time: 1 ms, at least: 4 readings}", "250 us", "1 ms to 10 s"),
    ],
)
def test_readings_that_no_meter_integrates_are_told(written: str, reading: str, ends: str) -> None:
    assert complaints({"{time: 400 ms, at least: 4 readings}": written}) == [
        f"n.yaml:30:15: each reading would take {reading}; expected readings of {ends}, as the meter of 'signal' takes"
    ]


@pytest.mark.parametrize("written", ["{time: 40 s, at least: 4}", "{time: 3 ms, at least: 3}"])
def test_readings_up_to_the_limits_of_the_meter_are_taken(written: str) -> None:
    match(night({"{time: 400 ms, at least: 4 readings}": written}), bench(), find_drivers())


@pytest.mark.parametrize(
    ("written", "furthest"),
    [("{in: 0 deg, out: 4000 deg}", "4000 deg"), ("{in: -3601 deg, out: 90 deg}", "-3601 deg")],
)
def test_a_mount_that_takes_an_element_out_must_reach_both_angles(written: str, furthest: str) -> None:
    recipe = {
        "roles:\n": "roles:\n  flip: rotation stage\n",
        "name: part,": f"name: part, taken out by: {{flip: {written}}},",
    }
    rig = {
        "instruments:\n": "instruments:\n  mount 9: {driver: gcode-rotary, at: tcp://10.0.0.5:5023}\n",
        "roles: {": "roles: {flip: mount 9, ",
    }

    (line,) = complaints(recipe, rig)

    assert f"the mount 'flip' would have to go to {furthest}; expected angles within its travel" in line


def test_what_is_of_another_kind_is_told_once_and_its_reach_not_asked() -> None:
    assert complaints(rig_changes={"oven: oven 1": "oven: mount 1", "part mount: mount 1": "part mount: oven 1"}) == [
        "b.yaml:12:21: 'oven 1' fills the role 'part mount' but is a temperature controller; "
        "expected a rotation stage, as n.yaml asks",
        "b.yaml:12:86: 'mount 1' fills the role 'oven' but is a rotation stage; "
        "expected a temperature controller, as n.yaml asks",
    ]


def test_repeats_ask_nothing_of_the_bench() -> None:
    match(night({"[{part mount: {turn: 1, step: 10 deg}}]": "[{repeat: 3}]"}), bench(), find_drivers())
