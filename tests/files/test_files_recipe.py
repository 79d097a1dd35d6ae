"""What a good recipe becomes."""

import hashlib
import json
import subprocess
import sys
from pathlib import Path

import pytest
from files_cases import RECIPE, recipe, replaced

from rigctl.files import load_recipe, parse_recipe
from rigctl.files.recipe import Axis, Dark, DwellPlan, OpticalElement, Recipe, Role, Source
from rigctl.files.written_recipe import WrittenRecipe
from rigctl.quantities import Measured

PLATE = """\
recipe: half-wave plate
roles: {part mount: rotation stage, signal: power meter}
source: {wavelength: 785.2 nm, drift: 0 %/h +- 0.5 %/h}
optics:
  - polarizer: {name: entry cube, axis: 0 deg, extinction ratio: 30 dB}
  - retarder: {name: plate, turned by: part mount, retardance: 0.5 waves, dial offset: 0 deg +- 5 deg,
               unknown: [retardance, dial offset]}
  - polarizer: {name: exit cube, axis: 22.5 deg +- 0.2 deg, extinction ratio: 1000:1}
  - detector: {role: signal, stray light: 20 nW +- 20 nW, unknown: stray light}
steps:
  - name: coarse
    sweep: [{part mount: {values: [0 deg, 45 deg, 0 deg]}}]
  - name: fine
    sweep: [{part mount: {range: 40 deg to 50 deg, step: 2.5 deg, approach: from above}}]
dwell: {time: 1 s, at least: 10 readings}
"""


def plate(old: str = "", new: str = "") -> Recipe:
    return parse_recipe(replaced(PLATE, {old: new}), "p.yaml")


def test_roles_have_a_kind_and_may_be_optional() -> None:
    assert recipe().roles == {
        "part mount": Role("rotation stage"),
        "signal": Role("power meter"),
        "shutter": Role("shutter", is_optional=True),
    }


def test_the_source_has_wavelength_and_power_with_uncertainties() -> None:
    assert recipe().source == Source(Measured(785.2e-9, 0.3e-9), Measured(2e-3, 0.6e-3))


def test_a_source_may_state_how_it_drifts() -> None:
    assert plate().source == Source(Measured(785.2e-9), None, Measured(0.0, 0.005))


def test_the_optics_keep_the_order_of_the_light() -> None:
    assert [part.name for part in plate().optics] == ["entry cube", "plate", "exit cube", "signal"]


def test_a_fixed_polarizer_has_axis_and_extinction_ratio_but_no_dial() -> None:
    assert recipe().optics[0] == OpticalElement(
        "polarizer",
        "entry polarizer",
        axis=Measured(0.0),
        extinction_ratio=Measured(1e-5, 3e-6),
    )


def test_a_turned_polarizer_has_a_dial_at_zero_unless_it_says_more() -> None:
    assert recipe().optics[1] == OpticalElement(
        "polarizer",
        "part",
        turned_by="part mount",
        axis=Measured(0.0),
        dial_offset=Measured(0.0),
        extinction_ratio=Measured(1e-3),
        unknown=("extinction ratio", "dial offset"),
    )


def test_a_turned_retarder_has_retardance_and_dial_offset() -> None:
    assert plate().optics[1] == OpticalElement(
        "retarder",
        "plate",
        turned_by="part mount",
        axis=Measured(0.0),
        dial_offset=Measured(0.0, 5.0),
        retardance=Measured(0.5),
        unknown=("retardance", "dial offset"),
    )


def test_a_detector_bears_the_name_of_its_role() -> None:
    assert recipe().optics[2] == OpticalElement("detector", "signal", role="signal")


def test_one_unknown_may_stand_without_a_list() -> None:
    detector = plate().optics[3]

    assert (detector.unknown, detector.stray_light) == (("stray light",), Measured(20e-9, 20e-9))


@pytest.mark.parametrize("written", ["0.5 waves", "180 deg", "392.6 nm"])
def test_a_retardance_may_be_written_in_waves_degrees_or_nanometres(written: str) -> None:
    retardance = plate("0.5 waves", written).optics[1].retardance

    assert retardance is not None
    assert retardance.value == pytest.approx(0.5)


def test_a_sweep_alone_is_one_step_called_data() -> None:
    step = recipe().steps[0]

    assert (len(recipe().steps), step.name) == (1, "data")
    assert step.sweep == (Axis("part mount", "angle", tuple(5.0 * i for i in range(72)), "from below", 0.15),)


def test_steps_keep_their_names_and_order() -> None:
    assert [(step.name, step.sweep[0].values) for step in plate().steps] == [
        ("coarse", (0.0, 45.0, 0.0)),
        ("fine", (40.0, 42.5, 45.0, 47.5, 50.0)),
    ]


def test_an_axis_that_says_no_more_is_approached_from_either_side_without_settling() -> None:
    axis = plate().steps[0].sweep[0]

    assert (axis.approach, axis.settle_s) == ("either", 0.0)


def test_the_first_mount_of_a_sweep_turns_slowest() -> None:
    text = replaced(
        RECIPE,
        {
            "roles:": "roles:\n  analyser mount: rotation stage",
            "axis: 0 deg": "turned by: analyser mount",
            "sweep: [": "sweep: [{analyser mount: {values: [1 deg]}}, ",
        },
    )

    assert [axis.role for axis in parse_recipe(text, "r").steps[0].sweep] == ["analyser mount", "part mount"]


def test_the_dwell_has_a_time_and_a_number_of_readings() -> None:
    assert recipe().dwell == DwellPlan(0.4, 4)


def test_darks_are_taken_by_a_shutter_or_by_hand_or_not_at_all() -> None:
    by_hand = recipe({"{by: shutter, before: true, after: true}": "{by: hand, after: no}"})

    assert [r.darks for r in (recipe(), by_hand, plate())] == [
        (Dark("dark", "shutter"),),
        (Dark("dark", "hand", before=True, after=False),),
        (),
    ]


@pytest.mark.parametrize("word", ["on", "no", "10:30", "0012", "1e3", "null", "2027-03-01", "~", "0x1F"])
def test_words_that_other_readers_turn_into_something_else_stay_text(word: str) -> None:
    assert recipe({"sheet polarizer on a turning mount": word}).title == word


def test_a_recipe_keeps_its_text_and_where_it_came_from(tmp_path: Path) -> None:
    path = tmp_path / "r.yaml"
    path.write_text(RECIPE)

    read = load_recipe(path)

    assert (read.text, read.path) == (RECIPE, str(path))
    assert read.sha256 == hashlib.sha256(path.read_bytes()).hexdigest()


@pytest.mark.parametrize("encode", [lambda t: b"\xef\xbb\xbf" + t, lambda t: t.replace(b"\n", b"\r\n")])
def test_a_byte_order_mark_and_foreign_line_ends_change_nothing_but_the_text(encode: object, tmp_path: Path) -> None:
    data = encode(RECIPE.encode())  # type: ignore[operator]
    path = tmp_path / "r.yaml"
    path.write_bytes(data)

    read = load_recipe(path)

    assert (read.optics, read.steps, read.place("dwell")) == (
        recipe().optics,
        recipe().steps,
        recipe().place("dwell"),
    )
    assert read.text.encode() == data


@pytest.mark.parametrize(
    ("keys", "place"),
    [
        ((), (1, 1)),
        (("roles", "signal"), (4, 11)),
        (("optics", 1), (9, 5)),
        (("optics", 1, "polarizer", "turned by"), (9, 40)),
        (("sweep", 0, "part mount", "step"), (12, 38)),
        (("sweep", 0, "part mount", "start"), (12, 22)),
        (("nowhere", "at all"), (1, 1)),
    ],
)
def test_every_part_knows_its_place_or_that_of_the_part_around_it(
    keys: tuple[str | int, ...], place: tuple[int, int]
) -> None:
    assert recipe().place(*keys) == place


def test_equal_texts_make_equal_recipes() -> None:
    assert recipe() == recipe()


def test_the_json_schema_names_every_key_and_no_other() -> None:
    schema = WrittenRecipe.model_json_schema()

    assert sorted(schema["properties"]) == [
        "background",
        "dark",
        "dwell",
        "optics",
        "prepare",
        "recipe",
        "roles",
        "source",
        "steps",
        "sweep",
        "target uncertainty",
        "tolerance",
        "zero",
    ]
    assert schema["additionalProperties"] is False
    assert "extinction ratio" in json.dumps(schema)


def test_reading_a_recipe_imports_no_arithmetic_package() -> None:
    program = "import sys, rigctl.files; print(sorted({'numpy', 'scipy', 'h5py'} & set(sys.modules)))"

    result = subprocess.run([sys.executable, "-c", program], capture_output=True, text=True, check=True)

    assert result.stdout.strip() == "[]"
