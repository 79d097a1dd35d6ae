"""Keys that a driver adds are read by its table, kind by kind."""

from typing import Any

import pytest
from files_cases import told
from hypothesis import given
from hypothesis import strategies as st

from rigctl.files.document import parse_document
from rigctl.files.mistakes import Mistakes
from rigctl.files.options import read_options
from rigctl.files.part import Part
from rigctl.interfaces import Option
from rigctl.thermistor import EXAMPLE, Beta


def read(text: str, option: Option) -> Any:
    """Read the key `k` of a text by an option."""
    mistakes = Mistakes("f.yaml")
    part = Part.whole(parse_document(text, mistakes), mistakes)
    values = read_options(part, {"k": option}, others=("name",), whose="the driver")
    mistakes.raise_if_any()
    return values["k"]


@pytest.mark.parametrize(
    ("written", "option", "value"),
    [
        ("k: 5 mW", Option("power"), 5e-3),
        ("k: 5 deg", Option("angle"), 5.0),
        ("k: 20 deg/s", Option("angular speed"), 20.0),
        ("k: 1000:1", Option("ratio"), 1e-3),
        ("k: 20 uW to 2 mW", Option("span of power"), (20e-6, 2e-3)),
        ("k: -90 to 90 deg", Option("span of angle"), (-90.0, 90.0)),
        ("k: [1 ms, 1 s]", Option("list of time"), (1e-3, 1.0)),
        ("k: 1 ms", Option("list of time"), (1e-3,)),
        ("k: 0012", Option("text"), "0012"),
        ("k: no", Option("text"), "no"),
        ("k: 0012", Option("whole number"), 12),
        ("k: -3", Option("whole number"), -3),
        ("k: on", Option("choice", choices=("on", "off")), "on"),
        ("k: 295.15 K", Option("temperature"), 22.0),
        ("k: 0 deg", Option("angle", sign="not negative"), 0.0),
        ("k: 1 deg", Option("angle", sign="positive"), 1.0),
        ("k: beta 3976 K, 10 kOhm at 25 degC", Option("thermistor"), Beta(1e4, 25.0, 3976.0)),
        ("name: x", Option("power", default=1.0), 1.0),
        ("name: x", Option("text"), None),
    ],
)
def test_a_value_arrives_as_its_kind_says(written: str, option: Option, value: object) -> None:
    assert read(written, option) == value


@pytest.mark.parametrize(
    ("written", "option", "complaint"),
    [
        ("k: 0 deg", Option("angle", sign="positive"), "'0 deg' is not above zero; expected an angle such as 22.5 deg"),
        ("k: -1 deg", Option("angle", sign="not negative"), "'-1 deg' is negative; expected an angle such as 22.5 deg"),
        ("k: 0", Option("whole number", sign="positive"), "'0' is not above zero; expected a number such as 1"),
        (
            "k: [0 W]",
            Option("list of power", sign="positive"),
            "'0 W' is not above zero; expected a power such as 2 mW",
        ),
        (
            "k: 10 kohm",
            Option("thermistor"),
            f"'10 kohm' gives no constants of a thermistor; expected {EXAMPLE}",
        ),
        ("k: 1e3", Option("whole number"), "'1e3' is no whole number; expected a number such as 7"),
        ("k: ٣", Option("whole number"), "'٣' is no whole number; expected a number such as 7"),
        (
            "k: yes",
            Option("choice", choices=("on", "off")),
            "'yes' is not among the choices; expected on or off",
        ),
        ("k: [a]", Option("choice", choices=("on",)), "a list stands here; expected a single value"),
        ("k: {a: b}", Option("power"), "a mapping stands here; expected a single value"),
        (
            "k: {}",
            Option("list of power"),
            "an empty mapping stands here; expected a list with at least one entry",
        ),
        ("k:", Option("text"), "nothing is written here; expected a word"),
        (
            "k: 5 deg",
            Option("span of angle"),
            "'5 deg' is not a span; expected two ends, for example 0 to 22.5 deg",
        ),
    ],
)
def test_a_value_of_another_kind_is_told(written: str, option: Option, complaint: str) -> None:
    (line,) = told(lambda: read(written, option))

    assert line.split(": ", 1)[1] == complaint


def test_every_wrong_entry_of_a_list_is_told() -> None:
    lines = told(lambda: read("k: [1 W, 2 A, 3 s]", Option("list of power")))

    assert [line.split(": ")[0] for line in lines] == ["f.yaml:1:10", "f.yaml:1:15"]


@given(values=st.lists(st.integers(min_value=1, max_value=10**6), min_size=1, max_size=20))
def test_a_list_keeps_its_order(values: list[int]) -> None:
    written = ", ".join(f"{value} ms" for value in values)

    assert read(f"k: [{written}]", Option("list of time")) == pytest.approx(tuple(v / 1e3 for v in values))
