"""The JSON Schemas let pass every file that is right, and refuse much of what is wrong while it is typed."""

import json
import re
from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest
import yaml
from files_cases import DRIVERS, RECIPE, RIG, StubBench, replaced
from files_edits import edits, replacements
from full_cases import BENCH, NIGHT
from hypothesis import given, settings
from hypothesis import strategies as st
from jsonschema import Draft202012Validator

from rigctl.errors import FileError
from rigctl.files import parse_recipe, parse_rig
from rigctl.files.schema import recipe_schema, rig_schema
from rigctl.interfaces import Option
from rigctl.kinds import KINDS
from rigctl.plugins import find_bench_factory, find_drivers

RECIPES = Path(__file__).resolve().parents[2] / "recipes"
READY_RECIPES = sorted(RECIPES.glob("*.yaml"))
READY_RIGS = sorted((RECIPES / "rigs").glob("*.yaml"))


class EditorLoader(yaml.SafeLoader):
    """Reads plain scalars as an editor does: numbers and truth values of YAML 1.2, and no dates."""

    yaml_implicit_resolvers: dict[str, Any] = {}  # noqa: RUF012  # declared so by the library


EditorLoader.add_implicit_resolver("tag:yaml.org,2002:bool", re.compile("true|false"), list("tf"))
EditorLoader.add_implicit_resolver("tag:yaml.org,2002:int", re.compile(r"[-+]?[0-9]+$"), list("-+0123456789"))
EditorLoader.add_implicit_resolver(
    "tag:yaml.org,2002:float", re.compile(r"[-+]?[0-9]+\.[0-9]*(e[-+]?[0-9]+)?$"), list("-+0123456789")
)
LOADERS = [yaml.BaseLoader, EditorLoader]


def complaints(schema: dict[str, Any], text: str, loader: Any = EditorLoader) -> list[str]:
    """Return where a text breaks a schema, as paths of keys."""
    data = yaml.load(text, loader)
    errors = Draft202012Validator(schema).iter_errors(data)
    return ["/".join(map(str, error.absolute_path)) for error in errors]


def installed() -> dict[str, Any]:
    return rig_schema(find_drivers(), find_bench_factory())


def stubbed() -> dict[str, Any]:
    return rig_schema(DRIVERS, StubBench())


def of_recipe(old: str, new: str) -> list[str]:
    return complaints(recipe_schema(), replaced(NIGHT, {old: new}))


def of_rig(old: str, new: str) -> list[str]:
    return complaints(stubbed(), replaced(RIG, {old: new}))


@pytest.mark.parametrize(
    "schema", [recipe_schema(), installed(), stubbed(), rig_schema({}, None), rig_schema({}, StubBench())]
)
def test_a_schema_is_one(schema: dict[str, Any]) -> None:
    Draft202012Validator.check_schema(schema)

    assert json.loads(json.dumps(schema)) == schema


@pytest.mark.parametrize("loader", LOADERS)
@pytest.mark.parametrize("path", READY_RECIPES, ids=lambda path: path.stem)
def test_every_ready_recipe_passes(path: Path, loader: Any) -> None:
    assert complaints(recipe_schema(), path.read_text(encoding="utf-8"), loader) == []


@pytest.mark.parametrize("loader", LOADERS)
@pytest.mark.parametrize("path", READY_RIGS, ids=lambda path: path.stem)
def test_every_ready_rig_passes(path: Path, loader: Any) -> None:
    assert complaints(installed(), path.read_text(encoding="utf-8"), loader) == []


@pytest.mark.parametrize("text", [RECIPE, NIGHT])
def test_the_recipes_of_these_tests_pass(text: str) -> None:
    assert complaints(recipe_schema(), text) == []


def test_the_rigs_of_these_tests_pass() -> None:
    assert complaints(stubbed(), RIG) == []
    assert complaints(rig_schema(find_drivers(), None), BENCH) == []


@pytest.mark.parametrize(
    ("old", "new"),
    [
        ("4 readings", "4"),
        ("1000:1 +- 20 %", "30 dB"),
        ("0.25 waves +- 0.003 waves", "196.3 nm +- 1 nm (k=2)"),
        ("unknown: [retardance, dial offset]", "unknown: retardance"),
        ("without: part", "without: [part]\n    unattended: go on"),
        ("[{part mount: {turn: 1, step: 10 deg}}]", "[{repeat: 3}]"),
        ("22 degC,", "295.15 K,"),
        ("{turn: 1, step: 10 deg}", "{range: 0 to 90 deg, step: 10 deg, there and back: true}"),
        ("{turn: 1, step: 10 deg}", "{segments: [{range: 0 to 90 deg, step: 10 deg}, {values: [100 °]}]}"),
        ("before: true", "before: no"),
        ("785.2 nm", "0.7852 µm"),
        ("tolerance:", "zero: {before: true}\nbackground: {every: 1 h}\ntolerance:"),
    ],
)
def test_other_ways_of_writing_pass(old: str, new: str) -> None:
    assert of_recipe(old, new) == []


@pytest.mark.parametrize(
    ("old", "new", "path"),
    [
        ("settle:", "setle:", "steps/1/sweep/1/part mount"),
        ("785.2 nm +-", "785.2 mn +-", "source/wavelength"),
        ("step: 5 deg", "step: 5", "steps/1/sweep/1/part mount/step"),
        ("step: 5 deg", "step: 5deg", "steps/1/sweep/1/part mount/step"),
        ("step: 5 deg", "step: 5 degrees", "steps/1/sweep/1/part mount/step"),
        ("to: 34 mA", "to: 34 mW", "prepare/1/diode/to"),
        ("turn: 1, step: 5 deg", "step: 5 deg", "steps/1/sweep/1/part mount"),
        ("turn: 1, step: 5 deg", "turn: 1, values: [1 deg], step: 5 deg", "steps/1/sweep/1/part mount"),
        ("from below", "from belw", "steps/1/sweep/1/part mount/approach"),
        ("interleaved 3", "interleaved", "steps/1/order"),
        ("rotation stage", "rotating stage", "roles/part mount"),
        ("by: shutter, before: true, ", "", "dark"),
        ("before: true", "before: maybe", "dark/before"),
        ("dwell:", "dwel:", ""),
        ("- pick-off:  {to", "- pick-off: {two: 1, to", "optics/1/pick-off"),
        ("fraction: 4 %", "fraction:", "optics/1/pick-off/fraction"),
        ("name: part,", "name: a.b,", "optics/2/retarder/name"),
        ("steps:", "sweep: [{repeat: 3}]\nsteps:", ""),
        ("[{part mount: {turn: 1, step: 10 deg}}]", "[{repeat: three}]", "steps/0/sweep/0/repeat"),
        ("[{part mount: {turn: 1, step: 10 deg}}]", "[]", "steps/0/sweep"),
        ("[{part mount: {turn: 1, step: 10 deg}}]", "[{repeat: 3, oven: {values: [1 degC]}}]", "steps/0/sweep/0"),
        ("  shutter:    {is", "  a/b: {is", "roles"),
        ("for: 60 s, ", "", "prepare/0/diode tec/steady"),
    ],
)
def test_a_slip_in_a_recipe_is_refused_at_its_place(old: str, new: str, path: str) -> None:
    assert path in of_recipe(old, new)


@pytest.mark.parametrize(
    ("old", "new", "path"),
    [
        ("driver: turner", "driver: tuner", "instruments/mount 1/driver"),
        ("channel: B", "chanel: B", "instruments/mount 1"),
        ("positive: clockwise", "positive: left", "instruments/mount 1/positive"),
        ("-10 to 400 deg", "400 deg", "instruments/mount 1/travel"),
        ("[20 uW, 2 mW]", "[20 uW, 2 mA]", "instruments/head 7/ranges"),
        ("[20 uW, 2 mW]", "[]", "instruments/head 7/ranges"),
        ("channel: 3", "channel: three", "instruments/shutter 1/channel"),
        ("limits: {power: 5 mW}", "limits: {current: 5 mA}", "instruments/head 7/limits"),
        ("limits: {power: 5 mW}", "limits: {}", "instruments/head 7/limits"),
        ("channel: B", "limits: {power: 5 mW}", "instruments/mount 1"),
        ("tcp://10.0.0.7:5025", "10.0.0.7", "instruments/head 7/at"),
        ("due: 2027-03-01", "due: soon", "instruments/head 7/calibration/due"),
        ("seed: 7", "seed: seven", "simulated/seed"),
        ("room light: 2 uW", "room light: 2", "simulated/room light"),
        ("head 7: {offset: 30 nW}", "head 7: {ofset: 30 nW}", "simulated/head 7"),
        ("roles: {", "roll: {", ""),
    ],
)
def test_a_slip_in_a_rig_file_is_refused_at_its_place(old: str, new: str, path: str) -> None:
    assert path in of_rig(old, new)


@pytest.mark.parametrize(
    ("old", "new", "path"),
    [
        ("current: 45 mA, ", "", "diodes/D-118/limits"),
        ("class on label: 3B", "class on label: 3X", "diodes/D-118/class on label"),
        ("class on label: 3B", "colour: red", "diodes/D-118"),
        ("keep regulating", "keep going", "on stop/diode tec"),
        ("10 degC to 40 degC", "10 to 40", "diodes/D-118/limits/temperature"),
    ],
)
def test_a_slip_in_what_guards_a_diode_is_refused(old: str, new: str, path: str) -> None:
    assert path in complaints(rig_schema(find_drivers(), None), replaced(BENCH, {old: new}))


@pytest.mark.parametrize("written", ["1", "2", "3B", "4"])
def test_classes_that_are_digits_pass_as_numbers_too(written: str) -> None:
    text = replaced(BENCH, {"class on label: 3B": f"class on label: {written}"})

    assert complaints(rig_schema(find_drivers(), None), text) == []


@given(text=st.one_of(edits(NIGHT), edits(RECIPE), replacements(NIGHT)))
@settings(max_examples=300, deadline=None)
def test_every_recipe_that_can_be_read_passes(text: str) -> None:
    try:
        parse_recipe(text, "r.yaml")
    except FileError:
        return

    assert complaints(recipe_schema(), text, yaml.BaseLoader) == []
    assert complaints(recipe_schema(), text, EditorLoader) == []


@given(text=st.one_of(edits(RIG), replacements(RIG)))
@settings(max_examples=200, deadline=None)
def test_every_rig_file_that_can_be_read_passes(text: str) -> None:
    try:
        parse_rig(text, "b.yaml", DRIVERS, StubBench())
    except FileError:
        return

    assert complaints(stubbed(), text, yaml.BaseLoader) == []
    assert complaints(stubbed(), text, EditorLoader) == []


def leaves(schema: Any) -> Iterator[dict[str, Any]]:
    """Yield every part of a schema that describes a text by a pattern."""
    if isinstance(schema, dict):
        if "pattern" in schema and "examples" in schema:
            yield schema
        for value in schema.values():
            yield from leaves(value)
    elif isinstance(schema, list):
        for value in schema:
            yield from leaves(value)


@pytest.mark.parametrize("schema", [recipe_schema(), installed()])
def test_every_example_fits_its_pattern(schema: dict[str, Any]) -> None:
    found = list(leaves(schema))

    assert len(found) > 10
    assert [leaf for leaf in found for example in leaf["examples"] if not re.search(leaf["pattern"], example)] == []


def test_every_key_of_a_recipe_says_what_it_means() -> None:
    schema = recipe_schema()
    models = [schema, *schema["$defs"].values()]

    silent = [
        key
        for model in models
        for key, part in model["properties"].items()
        if not {"description", "$ref"} & part.keys()
    ]

    assert silent == []


def test_an_editor_is_offered_every_driver_and_what_it_is() -> None:
    schema = installed()

    assert schema["properties"]["instruments"]["additionalProperties"]["properties"]["driver"]["enum"] == sorted(
        find_drivers()
    )
    assert schema["$defs"]["driver scpi-power-meter"]["description"] == "optical power meter that speaks SCPI"


def test_options_say_what_they_mean() -> None:
    channel = installed()["$defs"]["driver scpi-switch"]["properties"]["channel"]

    assert channel["description"] == find_drivers()["scpi-switch"].options["channel"].meaning


@pytest.mark.parametrize("kind", [kind for kind, row in KINDS.items() if row.units])
def test_every_unit_of_every_kind_fits_the_pattern(kind: str) -> None:
    from rigctl.files.patterns import measured_schema, quantity_schema

    for unit in KINDS[kind].unit_names:
        assert re.search(quantity_schema(kind)["pattern"], f"-1.5e-3 {unit}")
        assert re.search(measured_schema(kind)["pattern"], f"5 {unit} +- 0.1 {unit} (k=2)")
        assert not re.search(quantity_schema(kind)["pattern"], f"5 {unit}x")


@pytest.mark.parametrize(
    ("option", "right", "wrong"),
    [
        (Option("text"), ["A", 7, True], [[], {}]),
        (Option("choice", choices=("on", "off")), ["on"], ["On", 1]),
        (Option("whole number"), [3, "-3", "0012"], ["1e3", 1.5, []]),
        (Option("angle"), ["5 deg", "-.5 mrad"], [5, "5", "5 mm"]),
        (Option("ratio"), ["1000:1", "30 dB", "4 %", 0.04], ["4 %%", "30 db"]),
        (Option("span of temperature"), ["10 to 40 degC", "283 K to 40 degC"], ["10 degC", "10 to 40", "40 degC to"]),
        (Option("list of power"), ["1 mW", ["1 mW"], ["1 uW", "1 mW"]], [[], ["1"], {}]),
        (Option("thermistor"), ["beta 3976 K, 10 kOhm at 25 degC"], [3976, []]),
    ],
    ids=lambda value: value.kind if isinstance(value, Option) else "",
)
def test_every_kind_of_option_has_a_schema(option: Option, right: list[object], wrong: list[object]) -> None:
    driver = replace(DRIVERS["flap"], options={"k": option})
    schema = rig_schema({"flap": driver}, None)
    validator = Draft202012Validator(schema["$defs"]["driver flap"]["properties"]["k"])

    assert [value for value in right if not validator.is_valid(value)] == []
    assert [value for value in wrong if validator.is_valid(value)] == []


def test_an_option_says_what_it_means_where_it_does() -> None:
    driver = replace(DRIVERS["flap"], options={"k": Option("time", meaning="how fast it moves")})

    option = rig_schema({"flap": driver}, None)["$defs"]["driver flap"]["properties"]["k"]

    assert option["description"] == "how fast it moves"
    assert option["examples"] == [KINDS["time"].example]
