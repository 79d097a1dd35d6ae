"""Mistakes in the recipe of a whole night are told with their places."""

import pytest
from files_cases import Changes, told
from full_cases import NIGHT, night

from rigctl.errors import FileError

OVEN = "{values: [22 degC, 25 degC, 28 degC], steady: {within: 0.05 K, for: 5 min, give up after: 40 min}}"
STEADY = "steady: {within: 0.02 K, slope: 0.01 K/min, for: 60 s, give up after: 15 min}"
EMPTY = "[{part mount: {turn: 1, step: 10 deg}}]"


def mistake(changes: Changes) -> tuple[str, str, str, str]:
    """Return the text at the place of the only mistake, what, expected and nearest."""
    with pytest.raises(FileError) as caught:
        night(changes)
    (only,) = caught.value.mistakes
    text = NIGHT
    for old, new in changes.items():
        text = text.replace(old, new, 1)
    return text.splitlines()[only.line - 1][only.column - 1 :], only.what, only.expected, only.nearest


@pytest.mark.parametrize(
    ("old", "new", "at", "what", "expected", "nearest"),
    [
        (
            "22 degC,",
            "22 C,",
            "22 C,",
            "'C' is not a unit of a temperature",
            "one of the units degC, K",
            "22 °C",
        ),
        (
            "22 degC,",
            "22 deg,",
            "22 deg,",
            "'deg' is not a unit of a temperature",
            "one of the units degC, K",
            "22 degC",
        ),
        ("22 degC,", "22,", "22,", "'22' has no unit", "one of the units degC, K", "22 degC"),
        (
            OVEN,
            "{range: 20 to 24 degC, step: 1 degC}",
            "1 degC",
            "'degC' is not a unit of a temperature difference",
            "one of the units K, mK",
            "",
        ),
        (
            OVEN,
            "{range: 20 to 24 degC, step: 3 K}",
            "3 K",
            "steps of 3 K do not divide the range of 4 K",
            "steps of 2 K or 4 K",
            "",
        ),
        (
            OVEN,
            "{range: 20 to 24 degC}",
            "{range",
            "the key 'step' is missing",
            "a step such as 1 K",
            "",
        ),
        (
            OVEN,
            "{values: [22 degC], approach: from below}",
            "from below",
            "'approach' goes with a mount alone",
            "",
            "",
        ),
        (OVEN, "{turn: 1, step: 1 K}", "1, step", "'turn' goes with a mount alone", "", ""),
        (OVEN, "{}", "{}", "something is missing here", "exactly one of 'values' or 'range'", ""),
        (
            OVEN,
            "{values: [22 degC], segments: [{values: [1 degC]}]}",
            "{values",
            "'values' and 'segments' exclude each other",
            "exactly one of 'turn', 'values', 'range' or 'segments'",
            "",
        ),
        (
            OVEN,
            "{segments: [{range: 1 to 2 degC, step: 0.3 K}]}",
            "0.3 K",
            "steps of 0.3 K do not divide the range of 1 K",
            "steps of 0.25 K or 0.5 K",
            "",
        ),
        (OVEN, "{segments: []}", "[]", "an empty list stands here", "a list with at least one entry", ""),
        (
            "5 deg, approach",
            "5 deg, steady: {within: 1 K, for: 1 s, give up after: 2 s}, approach",
            "{within",
            "'steady' goes with a temperature controller alone",
            "",
            "",
        ),
        (
            "for: 5 min, give up after: 40 min",
            "for: 5 min, give up after: 4 min",
            "4 min",
            "gives up before the temperature can have been steady for so long",
            "a time longer than 'for'",
            "",
        ),
        (
            "within: 0.05 K",
            "within: 0 K",
            "0 K",
            "'0 K' is not above zero",
            "a temperature difference such as 0.05 K",
            "",
        ),
        ("within: 0.05 K, ", "", "steady: {for", "the key 'within' of 'steady' is missing", "", ""),
        ("give up after: 40", "give up: 40", "give up: 40", "unknown key 'give up'", "", "give up after"),
        (
            "warm-up",
            "warm up",
            "warm up",
            "unknown key 'warm up'",
            "",
            "warm-up",
        ),
        ("to: 34 mA", "to: 24 degC", "24 degC,", "'degC' is not a unit of a current", "one of the units A, mA, uA", ""),
        (
            "to: 34 mA",
            "to: -34 mA",
            "-34 mA",
            "a current of -34 mA would go through the diode backwards",
            "a current from zero on",
            "",
        ),
        ("ramp: 5 mA/s", STEADY, "{within", "'steady' goes with a temperature controller alone", "", ""),
        (STEADY, "ramp: 5 mA/s", "5 mA/s", "'ramp' goes with a current source alone", "", ""),
        (
            "  - diode:     {to",
            "  - signal: {to",
            "signal: {to",
            "the role 'signal' is a power meter",
            "a role that is a temperature controller or current source",
            "",
        ),
        (
            "  - diode:     {to",
            "  - diod: {to",
            "diod: {to",
            "no role is called 'diod'",
            "a role that is a temperature controller or current source, here 'diode', 'diode tec' or 'oven'",
            "diode",
        ),
        (
            "  - diode:     {to",
            "  - diode tec: {to: 2 degC}\n  - diode:     {to",
            "diode tec: {to: 2",
            "the role 'diode tec' is prepared already",
            "each role once",
            "",
        ),
        (
            "order: interleaved 3",
            "order: interleaved 1",
            "interleaved 1",
            "'interleaved 1' leaves nothing between",
            "interleaved 2 or more",
            "",
        ),
        (
            "order: interleaved 3",
            "order: interleaved 73",
            "interleaved 73",
            "a stride of 73 passes over all 72 values of the last axis",
            "interleaved 72 or less",
            "",
        ),
        (
            "order: interleaved 3",
            "order: interleave 3",
            "interleave 3",
            "'interleave 3' is not among the choices",
            "as written, interleaved 3 or shuffled 7",
            "interleaved 3",
        ),
        (
            "order: interleaved 3",
            "order: interleaved three",
            "interleaved three",
            "'interleaved three' is not among the choices",
            "as written, interleaved 3 or shuffled 7",
            "interleaved 3",
        ),
        (
            "without: part",
            "without: parts",
            "parts",
            "no element is called 'parts'",
            "'entry cube', 'part', 'quarter-wave plate' or 'exit cube'",
            "part",
        ),
        (
            "without: part",
            "without: pick-off",
            "pick-off",
            "the pick-off 'pick-off' stays in the beam",
            "a polarizer or retarder",
            "",
        ),
        (
            "without: part",
            "without: signal",
            "signal",
            "the detector 'signal' stays in the beam",
            "a polarizer or retarder",
            "",
        ),
        ("without: part", "without: [part, part]", "part]", "'part' is listed twice", "", ""),
        (
            "without: part",
            "unattended: go on",
            "unattended",
            "nobody is needed in this step",
            "'unattended' beside 'without'",
            "",
        ),
        (
            "without: part",
            "without: part\n    unattended: go away",
            "go away",
            "'go away' is not among the choices",
            "go on or stop",
            "",
        ),
        (
            EMPTY,
            "[{repeat: 0}]",
            "0}",
            "0 is not a whole number above zero",
            "a whole number such as 3",
            "",
        ),
        (EMPTY, "[{repeat: {values: [1]}}]", "{values", "keys or a list stand here", "a whole number such as 3", ""),
        (
            EMPTY,
            "[{repeat: 3}, {repeat: 3}]",
            "repeat: 3}]",
            "'repeat' is swept twice in one step",
            "each role once",
            "",
        ),
        (
            EMPTY,
            "[{repeat: 100000}, {part mount: {turn: 1, step: 1 deg}}]",
            "[{repeat",
            "the sweep makes 36000000 visits",
            "at most 1000000 in a step",
            "",
        ),
        (
            "driven by: diode",
            "driven by: diode tec",
            "diode tec, cooled",
            "the role 'diode tec' is a temperature controller",
            "a role that is a current source",
            "",
        ),
        (
            "cooled by: diode tec",
            "cooled by: diode",
            "diode}",
            "the role 'diode' is a current source",
            "a role that is a temperature controller",
            "",
        ),
        (
            "to: monitor",
            "to: shutter",
            "shutter,",
            "the role 'shutter' is a shutter",
            "a role that is a power meter",
            "",
        ),
        (
            "to: monitor",
            "to: signal",
            "signal, unknown",
            "the role 'signal' is a detector already",
            "a detector for each role",
            "",
        ),
        ("fraction: 4 %", "fraction: 0", "0}", "'0' is not above zero", "a ratio such as 1000:1", ""),
        (
            "{to: monitor, fraction: 4 %}",
            "{to: monitor}",
            "pick-off",
            "the key 'fraction' of 'pick-off' is missing",
            "",
            "",
        ),
        (
            "warmed by: oven",
            "warmed by: diode",
            "diode,",
            "the role 'diode' is a current source",
            "a role that is a temperature controller",
            "",
        ),
        (
            "dial offset]}",
            "dial offset], each: {retardanc: oven}}",
            "retardanc:",
            "'retardanc' is no quantity of a retarder",
            "'axis', 'retardance', 'dial offset' or 'temperature coefficient'",
            "retardance",
        ),
        (
            "dial offset]}",
            "dial offset], each: {axis: oven}}",
            "axis: oven",
            "'axis' is exact, so it cannot differ",
            "a quantity that is unknown or has a tolerance",
            "",
        ),
        (
            "dial offset]}",
            "dial offset], each: {retardance: signal}}",
            "signal}",
            "the role 'signal' is a power meter",
            "a role that is a temperature controller",
            "",
        ),
        (
            "dial offset]}",
            "dial offset, temperature coefficient], each: {retardance: oven}}",
            "oven}",
            "the coefficient follows from the retardance at each level, so both cannot be found",
            "'each', or an unknown temperature coefficient",
            "",
        ),
        (
            "retardance: 0.25 waves +- 0.003 waves",
            "retardance: 0.25 waves, temperature coefficient: 1 ppm/K",
            "temperature coefficient",
            "an element that nothing warms has no temperature coefficient",
            "'warmed by'",
            "",
        ),
        (
            "retardance: 0.25 waves +- 0.003 waves",
            "retardance: 0.25 waves, unknown: temperature coefficient",
            "temperature coefficient}",
            "an element that nothing warms has no temperature coefficient",
            "'warmed by'",
            "",
        ),
        (
            "retardance: 0.25 waves +- 0.003 waves",
            "retardance: 0.25 waves, reference temperature: 20 degC",
            "reference temperature",
            "an element that nothing warms has no reference temperature",
            "'warmed by'",
            "",
        ),
        (
            "part.retardance: 0.49",
            "part.retardence: 0.49",
            "part.retardence",
            "no quantity is called 'part.retardence'",
            "an element, a dot and a quantity, such as part.retardance",
            "part.retardance",
        ),
        (
            "0.49 to 0.51 waves",
            "0.51 to 0.49 waves",
            "0.51",
            "the span '0.51 to 0.49 waves' does not go up",
            "the lower end first",
            "",
        ),
        (
            "0.49 to 0.51 waves",
            "0.5 mm",
            "0.5 mm",
            "'0.5 mm' is not a span",
            "two ends, for example 0 to 0.25 waves",
            "",
        ),
        (
            "{part.retardance: 0.002 waves}",
            "{part.retardance: 0 waves}",
            "0 waves",
            "the uncertainty in '0.5 waves +- 0 waves' is not positive",
            "one above zero, or none if exact",
            "",
        ),
        (
            "before: true, after: true, every: 1 h",
            "before: true, every: 0 h",
            "0 h",
            "'0 h' is not above zero",
            "a time such as 400 ms",
            "",
        ),
        (
            "tolerance:",
            "zero: {before: no, after: no}\ntolerance:",
            "before",
            "a zero neither before nor after is none",
            "one of them true, or no 'zero' at all",
            "",
        ),
    ],
)
def test_a_mistake_is_told_at_its_place(old: str, new: str, at: str, what: str, expected: str, nearest: str) -> None:
    text, *rest = mistake({old: new})

    assert text.startswith(at)
    assert rest == [what, expected, nearest]


TAKEN = {"roles:\n": "roles:\n  flip: rotation stage\n  part slide: slide\n"}


@pytest.mark.parametrize(
    ("part", "cube", "at", "what"),
    [
        ("{flip: {in: 0 deg}}", "part slide", "flip", "a mount that takes an element out needs both angles"),
        ("flip", "part slide", "taken out by: flip", "a mount that takes an element out needs both angles"),
        (
            "{part slide: {in: 0 deg, out: 1 deg}}",
            "{flip: {in: 0 deg, out: 90 deg}}",
            "in: 0 deg, out: 1",
            "a slide knows by itself where in and out are",
        ),
        ("part mount", "part slide", "part mount", "the mount 'part mount' turns an element already"),
        ("part slide", "part slide", "part slide", "'part slide' takes out another element already"),
        ("signal", "part slide", "signal", "the role 'signal' is a power meter"),
        ("{flip: {in: 0 deg, out: 90 mm}}", "part slide", "90 mm", "'mm' is not a unit of an angle"),
    ],
)
def test_what_takes_an_element_out_must_be_able_to(part: str, cube: str, at: str, what: str) -> None:
    changes = {
        **TAKEN,
        "name: part,": f"name: part, taken out by: {part},",
        "name: exit cube,": f"name: exit cube, taken out by: {cube},",
    }

    with pytest.raises(FileError) as caught:
        night(changes)

    first = caught.value.mistakes[0]
    text = NIGHT
    for old, new in changes.items():
        text = text.replace(old, new, 1)
    assert first.what == what
    assert text.splitlines()[first.line - 1][first.column - 1 :].startswith(at)


@pytest.mark.parametrize(
    ("changes", "what"),
    [
        ({"  - diode:     {to: 34 mA, ramp: 5 mA/s, warm-up: 10 min}\n": ""}, "nothing sets 'diode'"),
        ({f"  - diode tec: {{to: 24 degC, {STEADY}}}\n": ""}, "nothing sets 'diode tec'"),
        ({f"      - oven: {OVEN}\n": ""}, "nothing sets 'oven'"),
        ({"driven by: diode, ": ""}, "the source 'diode' drives nothing"),
        (
            {"warmed by: oven, ": ""},
            "the controller 'oven' neither cools the source nor warms an element",
        ),
        (
            {"roles:\n": "roles:\n  spare: slide\n"},
            "the role 'spare' is a slide that nothing in the recipe uses",
        ),
        (
            {"roles:\n": "roles:\n  turner: rotation stage\n", EMPTY: "[{turner: {turn: 1, step: 10 deg}}]"},
            "the mount 'turner' turns no element",
        ),
    ],
)
def test_what_is_set_to_no_purpose_or_needed_but_never_set_is_told(changes: Changes, what: str) -> None:
    assert mistake(changes)[1] == what


def test_a_background_needs_a_source_that_can_be_switched_off() -> None:
    changes = {"driven by: diode, ": "", "tolerance:": "background: {before: true}\ntolerance:"}

    at, what, _, _ = mistake(changes)

    assert at.startswith("background")
    assert what == "a background switches the source off, but no role drives it"


def test_two_pick_offs_need_names() -> None:
    second = "  - pick-off:  {to: monitor, fraction: 4 %}\n"

    lines = told(
        lambda: night(
            {second: second + second.replace("monitor", "second"), "roles:\n": "roles:\n  second: power meter\n"}
        )
    )

    assert lines == [
        "n.yaml:15:16: the name 'pick-off' stands already in line 14; expected a name for this element alone"
    ]


def test_values_of_a_role_that_is_not_declared_are_read_by_their_unit() -> None:
    assert told(lambda: night({"- oven: {values": "- ovn: {values"})) == [
        "n.yaml:27:9: no role is called 'ovn'; expected a role that is a rotation stage, temperature controller or "
        "current source, here 'part mount', 'diode', 'diode tec' or 'oven'; did you mean 'oven'?"
    ]


@pytest.mark.parametrize("word", ["hand", "source", "repeat", "step"])
def test_words_that_mean_something_else_are_no_roles(word: str) -> None:
    lines = told(lambda: night({"roles:\n": f"roles:\n  {word}: relay\n"}))

    assert lines == [f"n.yaml:3:3: the word '{word}' has a meaning of its own; expected another name"]


@pytest.mark.parametrize("second", ["shutter", "{is: shutter, optional: true}"])
def test_a_second_shutter_is_told_with_its_place(second: str) -> None:
    at, what, expected, _ = mistake({"source:": f"  second one: {second}\nsource:"})

    assert at.startswith(f"second one: {second}")
    assert what == "the role 'second one' is a second shutter beside 'shutter'"
    assert expected == "one shutter, before everything else in the light's way"


def test_all_mistakes_of_a_whole_night_are_told_at_once() -> None:
    changes = {
        "driven by: diode": "driven by: diod",
        "fraction: 4 %": "fraction: 400 %",
        "slope: 0.01 K/min": "slope: 0.01 K",
        "without: part": "without: prat",
        "22 degC, 25": "22 deg, 25",
        "approach: from below": "approach: below",
        "every: 1 h": "every: 1 hour",
        "0.49 to 0.51": "0.51 to 0.49",
    }

    assert len(told(lambda: night(changes))) == len(changes)
