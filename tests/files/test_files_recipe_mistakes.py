"""Each mistake in a recipe is told with its place, what was expected and the nearest valid word."""

import pytest
from files_cases import RECIPE, Changes, recipe, replaced, told

from rigctl.errors import FileError, Mistake
from rigctl.files import parse_recipe
from rigctl.files.mistakes import MOST

SWEEP = "{turn: 1, step: 5 deg, approach: from below, settle: 150 ms}"


def complaints(changes: Changes) -> list[str]:
    return told(lambda: recipe(changes))


def mistake(changes: Changes) -> tuple[str, str, str, str]:
    """Return place, what, expected and nearest of the only mistake."""
    with pytest.raises(FileError) as caught:
        recipe(changes)
    (only,) = caught.value.mistakes
    return f"{only.line}:{only.column}", only.what, only.expected, only.nearest


@pytest.mark.parametrize(
    ("old", "new", "place", "what", "expected", "nearest"),
    [
        ("settle:", "setle:", "12:67", "unknown key 'setle'", "", "settle"),
        ("dwell:", "dwel:", "13:1", "unknown key 'dwel'", "", "dwell"),
        ("roles:", "role:", "2:1", "unknown key 'role'", "", "roles"),
        ("is: shutter", "iss: shutter", "5:13", "unknown key 'iss'", "", "is"),
        ("unknown: [", "unkown: [", "10:17", "unknown key 'unkown'", "", "unknown"),
        ("axis: 0 deg", "fast axis: 0 deg", "8:40", "unknown key 'fast axis'", "", "axis"),
        (
            "step: 5 deg",
            "step: 5 mm",
            "12:38",
            "'mm' is not a unit of an angle",
            "one of the units deg, rad, mrad, arcmin, arcsec",
            "",
        ),
        (
            "step: 5 deg",
            "step: 5",
            "12:38",
            "'5' has no unit",
            "one of the units deg, rad, mrad, arcmin, arcsec",
            "5 deg",
        ),
        ("2 mW +- 30 %", "nan", "6:49", "'nan' is not a finite number", "a power such as 2 mW", ""),
        (
            "time: 400 ms",
            "time: 400 mW",
            "13:15",
            "'mW' is not a unit of a time",
            "one of the units s, ms, us, min, h, d",
            "",
        ),
        (
            "time: 400 ms",
            "time: -400 ms",
            "13:15",
            "a time of -400 ms is negative",
            "a time such as 400 ms",
            "",
        ),
        ("time: 400 ms", "time: 0 ms", "13:15", "'0 ms' is not above zero", "a time such as 400 ms", ""),
        ("time: 400 ms", "time:", "13:14", "nothing is written here", "a time such as 400 ms", ""),
        ("time: 400 ms", "time: [1 s]", "13:15", "a list stands here", "a time such as 400 ms", ""),
        ("time: 400 ms", "time: {s: 1}", "13:15", "a mapping stands here", "a time such as 400 ms", ""),
        ("4 readings", "1 reading", "13:33", "one reading has no spread", "at least 2 readings", ""),
        (
            "4 readings",
            "4.5 readings",
            "13:33",
            "4.5 is not a whole number above zero",
            "a count such as 4 readings",
            "",
        ),
        (
            "settle: 150 ms",
            "settle: -150 ms",
            "12:75",
            "a time of -150 ms is negative",
            "a time such as 400 ms",
            "",
        ),
        (
            "785.2 nm +- 0.3 nm",
            "-785 nm",
            "6:22",
            "a length of -785 nm is not above zero",
            "a length such as 785.2 nm",
            "",
        ),
        (
            "785.2 nm +- 0.3 nm",
            "785.2 nm +- 0.3",
            "6:22",
            "'0.3' has no unit",
            "one of the units m, mm, nm, um",
            "0.3 nm",
        ),
        (
            "rotation stage",
            "rotating stage",
            "3:15",
            "'rotating stage' is not among the choices",
            "rotation stage, power meter, shutter, current source, temperature controller, relay or slide",
            "rotation stage",
        ),
        (
            "from below",
            "from belw",
            "12:55",
            "'from belw' is not among the choices",
            "from below, from above or either",
            "from below",
        ),
        (
            "optional: true",
            "optional: maybe",
            "5:36",
            "'maybe' is neither true nor false",
            "true or false",
            "",
        ),
        (
            "extinction ratio: 1000:1",
            "extinction ratio: 1000",
            "9:70",
            "a ratio of 1000 is not between 0 and 1",
            "a ratio such as 1000:1",
            "1000:1",
        ),
        (
            "extinction ratio: 1000:1,\n                ",
            "",
            "9:5",
            "the key 'extinction ratio' of 'polarizer' is missing",
            "",
            "",
        ),
        (
            "axis: 0 deg",
            "axis: 0 deg +- 10 %",
            "8:46",
            "the uncertainty in '0 deg +- 10 %' is not positive",
            "one above zero, or none if exact",
            "",
        ),
        (
            "{time: 400 ms, at least: 4 readings}",
            "400 ms",
            "13:8",
            "'400 ms' stands here",
            "a mapping with keys such as 'time' or 'at least'",
            "",
        ),
        (
            "[{part mount: {turn: 1, step: 5 deg, approach: from below, settle: 150 ms}}]",
            "part mount",
            "12:8",
            "'part mount' stands here",
            "a list with at least one entry",
            "",
        ),
        (
            "[{part mount: {turn: 1, step: 5 deg, approach: from below, settle: 150 ms}}]",
            "[]",
            "12:8",
            "an empty list stands here",
            "a list with at least one entry",
            "",
        ),
        (
            "{turn: 1, step: 5 deg, approach: from below, settle: 150 ms}",
            "5 deg",
            "12:22",
            "'5 deg' stands here",
            "a mapping with keys such as 'turn', 'values', 'range' or 'step'",
            "",
        ),
        (
            "- detector: {role: signal}",
            "- detector",
            "11:5",
            "'detector' stands here",
            "a mapping with keys such as 'polarizer', 'retarder', 'pick-off' or 'detector'",
            "",
        ),
        (
            "- detector: {role: signal}",
            "- {}",
            "11:5",
            "something is missing here",
            "exactly one of 'polarizer', 'retarder', 'pick-off' or 'detector'",
            "",
        ),
        (
            "- polarizer: {name: part",
            "- polariser: {name: part",
            "9:5",
            "unknown key 'polariser'",
            "",
            "polarizer",
        ),
        (
            "name: part,",
            "name: a.b,",
            "9:23",
            "'a.b' is no name",
            "a letter, then letters, digits, spaces, '-' or '_', at most 40 in all",
            "",
        ),
        ("name: part,", "name: [part],", "9:23", "a list stands here", "a name", ""),
        (
            "recipe: sheet polarizer on a turning mount",
            "recipe:",
            "1:8",
            "the title is empty or too long",
            "1 to 200 characters",
            "",
        ),
        ("at least: 4 readings", "", "13:1", "the key 'at least' of 'dwell' is missing", "", ""),
    ],
)
def test_a_wrong_key_or_value_is_told(old: str, new: str, place: str, what: str, expected: str, nearest: str) -> None:
    assert mistake({old: new}) == (place, what, expected, nearest)


@pytest.mark.parametrize(
    ("old", "new", "place", "what", "expected", "nearest"),
    [
        (
            "{role: signal}",
            "{role: singal}",
            "11:22",
            "no role is called 'singal'",
            "a role that is a power meter, here 'signal'",
            "signal",
        ),
        (
            "{role: signal}",
            "{role: part mount}",
            "11:22",
            "the role 'part mount' is a rotation stage",
            "a role that is a power meter",
            "",
        ),
        (
            "turned by: part mount",
            "turned by: signal",
            "9:40",
            "the role 'signal' is a power meter",
            "a role that is a rotation stage",
            "",
        ),
        (
            "by: shutter",
            "by: shuter",
            "14:12",
            "no role is called 'shuter'",
            "a role that is a shutter, here 'shutter'",
            "shutter",
        ),
        (
            "by: shutter",
            "by: signal",
            "14:12",
            "the role 'signal' is a power meter",
            "a role that is a shutter",
            "",
        ),
        (
            "{part mount: {turn",
            "{part mout: {turn",
            "12:10",
            "no role is called 'part mout'",
            "a role that is a rotation stage, temperature controller or current source, here 'part mount'",
            "part mount",
        ),
        (
            "[extinction ratio, dial offset]",
            "[extinction, dial offset]",
            "10:27",
            "'extinction' is no quantity of a polarizer",
            "'axis', 'extinction ratio' or 'dial offset'",
            "extinction ratio",
        ),
        (
            "[extinction ratio, dial offset]",
            "[retardance]",
            "10:27",
            "'retardance' is no quantity of a polarizer",
            "'axis', 'extinction ratio' or 'dial offset'",
            "",
        ),
        (
            "[extinction ratio, dial offset]",
            "[dial offset, dial offset]",
            "10:40",
            "'dial offset' is listed twice",
            "",
            "",
        ),
        (
            "name: part,",
            "name: entry polarizer,",
            "9:23",
            "the name 'entry polarizer' stands already in line 8",
            "a name for this element alone",
            "",
        ),
        (
            "name: part,",
            "name: signal,",
            "9:23",
            "the name 'signal' is the name of a role",
            "a name for this element alone",
            "",
        ),
        (
            "name: part,",
            "name: source,",
            "9:23",
            "the name 'source' is a name of its own",
            "a name for this element alone",
            "",
        ),
        (
            "  - detector: {role: signal}\n",
            "",
            "7:1",
            "the light ends on no detector",
            "a last entry such as detector: {role: signal}",
            "",
        ),
        (
            "- detector: {role: signal}",
            "- detector: {role: signal}\n  - detector: {role: signal}",
            "12:22",
            "the role 'signal' is a detector already",
            "a detector for each role",
            "",
        ),
        (
            "axis: 0 deg, ",
            "",
            "8:5",
            "an element that no mount turns needs its 'axis'",
            "a key such as axis: 0 deg",
            "",
        ),
        (
            "axis: 0 deg",
            "axis: 0 deg, dial offset: 1 deg",
            "8:53",
            "an element that no mount turns has no dial offset",
            "'turned by', or 'axis' instead",
            "",
        ),
        (
            "axis: 0 deg",
            "axis: 0 deg, unknown: dial offset",
            "8:62",
            "an element that no mount turns has no dial offset",
            "'turned by', or 'axis' instead",
            "",
        ),
        (
            "signal: power meter",
            "signal: {is: power meter, optional: true}",
            "4:39",
            "the role 'signal' cannot be optional: the recipe needs it",
            "false",
            "",
        ),
        (
            "signal: power meter",
            "signal: power meter\n  monitor: power meter",
            "5:3",
            "the role 'monitor' is a power meter that nothing in the recipe uses",
            "a detector or an element that names it",
            "",
        ),
        (
            "signal: power meter",
            "signal: power meter\n  a/b: relay",
            "5:3",
            "'a/b' is no name of a role",
            "a letter, then letters A to Z, digits, spaces or '_', at most 40 in all",
            "",
        ),
        (
            "signal: power meter",
            "signal: power meter\n  hand: relay",
            "5:3",
            "the word 'hand' has a meaning of its own",
            "another name",
            "",
        ),
        (
            "before: true, after: true",
            "before: no, after: false",
            "14:21",
            "a dark neither before nor after is none",
            "one of them true, or no 'dark' at all",
            "",
        ),
        (
            "sweep: [{part mount: {turn: 1, step: 5 deg, approach: from below, settle: 150 ms}}]\n",
            "",
            "1:1",
            "nothing is swept",
            "a key 'sweep', or 'steps'",
            "",
        ),
        (
            "turned by: part mount",
            "axis: 0 deg",
            "10:45",
            "an element that no mount turns has no dial offset",
            "'turned by', or 'axis' instead",
            "",
        ),
        (
            "settle: 150 ms}}",
            "settle: 150 ms}}, {part mount: {values: [1 deg]}}",
            "12:86",
            "'part mount' is swept twice in one step",
            "each role once",
            "",
        ),
        (
            "sweep: [{",
            "sweep: [{}, {",
            "12:9",
            "no roles stand in one entry",
            "one role in an entry: the first turns slowest",
            "",
        ),
    ],
)
def test_parts_that_do_not_go_together_are_told(
    old: str, new: str, place: str, what: str, expected: str, nearest: str
) -> None:
    assert mistake({old: new}) == (place, what, expected, nearest)


@pytest.mark.parametrize(
    ("axis", "place", "what", "expected", "nearest"),
    [
        ("{turn: 1, step: 0 deg}", "12:38", "a step of 0 deg leads nowhere", "a step above zero", ""),
        ("{turn: 1, step: -5 deg}", "12:38", "a step of -5 deg leads nowhere", "a step above zero", ""),
        (
            "{turn: 1, step: 7 deg}",
            "12:38",
            "steps of 7 deg do not divide the turn of 360 deg",
            "steps of 6 deg or 7.2 deg",
            "",
        ),
        (
            "{turn: 1, step: 400 deg}",
            "12:38",
            "steps of 400 deg do not divide the turn of 360 deg",
            "steps of 360 deg",
            "",
        ),
        (
            "{turn: 1, step: 0.0001 deg}",
            "12:38",
            "steps of 0.0001 deg make more than 100000 angles",
            "larger steps",
            "",
        ),
        (
            "{turn: 1, step: 1e-300 deg}",
            "12:38",
            "steps of 1e-300 deg make more than 100000 angles",
            "larger steps",
            "",
        ),
        ("{turn: 1}", "12:22", "the key 'step' is missing", "a step such as 5 deg", ""),
        (
            "{step: 5 deg}",
            "12:22",
            "something is missing here",
            "exactly one of 'turn', 'values' or 'range'",
            "",
        ),
        ("{turn: 0, step: 5 deg}", "12:29", "'0' is not above zero", "a number such as 2", ""),
        (
            "{turn: 1, values: [1 deg]}",
            "12:22",
            "'turn' and 'values' exclude each other",
            "exactly one of 'turn', 'values' or 'range'",
            "",
        ),
        (
            "{values: [1 deg], step: 5 deg}",
            "12:46",
            "'step' goes with 'turn' or 'range', not with 'values'",
            "",
            "",
        ),
        ("{values: []}", "12:31", "an empty list stands here", "a list with at least one entry", ""),
        (
            "{values: [1 deg, 2]}",
            "12:39",
            "'2' has no unit",
            "one of the units deg, rad, mrad, arcmin, arcsec",
            "2 deg",
        ),
        (
            "{range: 0 deg to 90 deg, step: 7 deg}",
            "12:53",
            "steps of 7 deg do not divide the range of 90 deg",
            "steps of 6 deg or 7.5 deg",
            "",
        ),
        (
            "{range: 90 to 0 deg, step: 5 deg}",
            "12:30",
            "the span '90 to 0 deg' does not go up",
            "the lower end first",
            "",
        ),
        (
            "{range: 0 to 10 deg, step: 5 deg, start: 3 deg}",
            "12:63",
            "'start' goes with 'turn' alone",
            "",
            "",
        ),
        ("{}", "12:22", "something is missing here", "exactly one of 'turn', 'values' or 'range'", ""),
    ],
)
def test_angles_that_make_no_sweep_are_told(axis: str, place: str, what: str, expected: str, nearest: str) -> None:
    assert mistake({SWEEP: axis}) == (place, what, expected, nearest)


def test_all_mistakes_of_a_file_are_told_at_once_in_its_order() -> None:
    changes = {
        "shutter: {is: shutter": "shutter: {is: shuter",
        "2 mW +- 30 %": "nan",
        "axis: 0 deg, ": "",
        "{role: signal}": "{role: singal}",
        "step: 5 deg": "step: 5",
        "dwell:": "dwel:",
        "by: shutter": "by: part mount",
    }

    places = [line.split(": ")[0] for line in complaints(changes)]

    assert places == [f"r.yaml:{p}" for p in ("5:17", "6:49", "8:5", "11:22", "12:38", "13:1", "14:12")]


def test_a_mistake_carries_its_parts_for_programs() -> None:
    with pytest.raises(FileError) as caught:
        recipe({"settle:": "setle:"})

    (mistake,) = caught.value.mistakes
    assert mistake == Mistake("r.yaml", 12, 67, "setle", "unknown key 'setle'", nearest="settle")
    assert caught.value.exit_code == 2


def test_a_decimal_comma_in_a_mapping_is_told_for_what_it_is() -> None:
    assert complaints({"2 mW +- 30 %": "5,0 mW"}) == [
        "r.yaml:6:49: '5' has no unit; expected one of the units W, mW, uW, nW, pW; did you mean '5 mW'?",
        "r.yaml:6:51: unknown key '0 mW'; expected a decimal point: a comma ends a value here",
    ]


def test_an_element_in_front_of_the_others_cannot_be_the_detector() -> None:
    moved = {"  - detector: {role: signal}\n": "", "optics:\n": "optics:\n  - detector: {role: signal}\n"}

    assert complaints(moved) == [
        "r.yaml:9:5: a polarizer stands behind the detector; expected detectors at the end of the optics",
        "r.yaml:10:5: a polarizer stands behind the detector; expected detectors at the end of the optics",
    ]


def test_an_empty_mapping_lacks_every_key_that_a_recipe_needs() -> None:
    assert told(lambda: parse_recipe("{}", "r.yaml")) == [
        "r.yaml:1:1: the key 'recipe' is missing",
        "r.yaml:1:1: the key 'roles' is missing",
        "r.yaml:1:1: the key 'source' is missing",
        "r.yaml:1:1: the key 'optics' is missing",
        "r.yaml:1:1: the key 'dwell' is missing",
        "r.yaml:1:1: nothing is swept; expected a key 'sweep', or 'steps'",
    ]


def test_a_file_full_of_mistakes_is_given_up_after_some() -> None:
    keys = "".join(f"key {i}: x\n" for i in range(1000))

    lines = told(lambda: parse_recipe(RECIPE + keys, "r.yaml"))

    assert len(lines) == MOST + 1
    assert lines[-1] == "50 mistakes: the rest of the file was not looked at: mend this first."


STEPS = "steps: [{name: empty, sweep: [{part mount: {values: [1 deg]}}]}, {name: NAME, sweep: []}]\n"


@pytest.mark.parametrize(
    ("name", "complaint"),
    [
        ("empty", "another step is called 'empty'; expected a name for this step alone"),
        ("instrument", "the run file uses the name 'instrument' itself; expected another name"),
        (
            "a/b",
            "'a/b' is no name of a step; expected a letter, then letters A to Z, digits, spaces or '_', "
            "at most 40 in all",
        ),
    ],
)
def test_names_of_steps_must_be_fit_for_the_run_file(name: str, complaint: str) -> None:
    sweep = next(line for line in RECIPE.splitlines(keepends=True) if line.startswith("sweep"))
    text = replaced(RECIPE, {sweep: STEPS.replace("NAME", name)})

    lines = told(lambda: parse_recipe(text, "r.yaml"))

    assert f"r.yaml:12:73: {complaint}" in lines


def test_a_recipe_has_a_sweep_or_steps_but_not_both() -> None:
    steps = "steps: [{name: a, sweep: [{part mount: {values: [1 deg]}}]}]\n"

    assert complaints({"dwell:": f"{steps}dwell:"}) == [
        "r.yaml:13:1: 'sweep' and 'steps' exclude each other; expected one of them"
    ]


def test_two_roles_that_the_run_file_could_not_tell_apart_are_refused() -> None:
    assert complaints({"  signal:": "  part_mount: relay\n  signal:"}) == [
        "r.yaml:4:3: the roles 'part mount' and 'part_mount' differ only by '_'"
    ]
