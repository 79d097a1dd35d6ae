"""One text becomes one value, or it is told what was expected in its place."""

from datetime import date
from typing import Annotated, Any

import pytest
from hypothesis import given
from hypothesis import strategies as st
from pydantic import TypeAdapter, ValidationError
from pydantic_core import PydanticCustomError

from rigctl.errors import QuantityError
from rigctl.files.leaves import (
    LONGEST_NAME,
    LONGEST_TITLE,
    WAVELENGTH,
    AddressText,
    DateText,
    NameText,
    Shown,
    SwitchText,
    TitleText,
    WholeText,
    WordText,
    choice,
    exactly_one,
    is_label,
    measured,
    quantity,
    read_choice,
    read_name,
    read_whole_number,
    span,
)
from rigctl.quantities import Measured


def read(annotation: Any, value: object, **context: object) -> Any:
    """Read one value as a model would."""
    return TypeAdapter(annotation).validate_python(value, context=dict(context))


def complaint(annotation: Any, value: object) -> dict[str, str]:
    """Return what is told of a value: what, expected, nearest."""
    with pytest.raises(ValidationError) as caught:
        read(annotation, value)
    (detail,) = caught.value.errors()
    return detail["ctx"]


@pytest.mark.parametrize(
    ("annotation", "text", "value"),
    [
        (Annotated[float, quantity("angle")], "90 deg", 90.0),
        (Annotated[float, quantity("temperature")], "295.15 K", 22.0),
        (Annotated[Measured, measured("power")], "2 mW +- 1 mW", Measured(2e-3, 1e-3)),
        (Annotated[tuple[float, float], span("temperature")], "10 to 40 degC", (10.0, 40.0)),
        (Annotated[str, choice("left", "right")], "left", "left"),
        (NameText, "entry polarizer-2", "entry polarizer-2"),
        (NameText, "λ/2 plate".replace("/", "-"), "λ-2 plate"),
        (TitleText, "  two   words ", "two words"),
        (SwitchText, "yes", True),
        (SwitchText, "true", True),
        (SwitchText, "no", False),
        (SwitchText, "false", False),
        (DateText, "2027-03-01", date(2027, 3, 1)),
        (WholeText, "-12", -12),
        (WordText, "0012", "0012"),
        (AddressText, "tcp://10.0.0.7:5025", "tcp://10.0.0.7:5025"),
    ],
)
def test_a_text_becomes_a_value(annotation: Any, text: str, value: object) -> None:
    assert read(annotation, text) == value


@pytest.mark.parametrize("value", [["5 deg"], {"a": "5 deg"}])
def test_what_is_no_text_is_told_with_what_was_expected(value: object) -> None:
    told = complaint(Annotated[float, quantity("angle")], value)

    noun = "list" if isinstance(value, list) else "mapping"
    assert (told["what"], told["expected"]) == (f"a {noun} stands here", "an angle such as 22.5 deg")


@pytest.mark.parametrize(
    ("annotation", "text", "what", "expected", "nearest"),
    [
        (
            Annotated[float, quantity("angle")],
            "5deg",
            "'5deg' has no space before its unit",
            "an angle such as 22.5 deg",
            "5 deg",
        ),
        (
            Annotated[float, quantity("power", is_positive=True)],
            "0 W",
            "'0 W' is not above zero",
            "a power such as 2 mW",
            "",
        ),
        (
            Annotated[Measured, measured("power", is_positive=True)],
            "-1 W +- 1 W",
            "'-1 W +- 1 W' is not above zero",
            "a power such as 2 mW",
            "",
        ),
        (
            Annotated[str, choice("left", "right")],
            "rigth",
            "'rigth' is not among the choices",
            "left or right",
            "right",
        ),
        (SwitchText, "yess", "'yess' is neither true nor false", "true or false", "yes"),
        (DateText, "2027-02-30", "'2027-02-30' is no date", "year, month and day such as 2027-03-01", ""),
        (WholeText, "1.0", "'1.0' is no whole number", "a number such as 7", ""),
        (WordText, "  ", "nothing is written here", "a word", ""),
        (TitleText, "", "the title is empty or too long", "1 to 200 characters", ""),
    ],
)
def test_a_text_that_will_not_do_is_told(annotation: Any, text: str, what: str, expected: str, nearest: str) -> None:
    told = complaint(annotation, text)

    assert (told["what"], told["expected"], told["nearest"]) == (what, expected, nearest)


def test_the_longest_title_may_stand_and_no_longer_one() -> None:
    assert read(TitleText, "x" * LONGEST_TITLE) == "x" * LONGEST_TITLE
    assert "too long" in complaint(TitleText, "x" * (LONGEST_TITLE + 1))["what"]


def test_a_retardance_in_nanometres_is_read_by_the_wavelength_of_the_context() -> None:
    annotation = Annotated[float, quantity("retardance")]

    assert read(annotation, "392.6 nm", **{WAVELENGTH: 785.2e-9}) == pytest.approx(0.5)
    assert "needs the wavelength" in complaint(annotation, "392.6 nm")["what"]


@pytest.mark.parametrize("name", ["a", "part", "entry polarizer", "λ-2 plate", "a_b", "x" * LONGEST_NAME])
def test_names_begin_with_a_letter_and_end_no_address(name: str) -> None:
    assert read_name(name) == name


@pytest.mark.parametrize(
    "name", ["", " a", "a ", "1a", "_a", "-a", "a.b", "a/b", "a@b", "a\nb", "x" * (LONGEST_NAME + 1)]
)
def test_names_that_would_break_an_address_or_a_path_are_refused(name: str) -> None:
    with pytest.raises(PydanticCustomError):
        read_name(name)


@given(st.text(max_size=60))
def test_a_label_is_a_name_that_the_run_file_can_bear(text: str) -> None:
    if is_label(text):
        assert read_name(text) == text
        assert text.replace(" ", "_").isidentifier()
        assert text.isascii()


@pytest.mark.parametrize(
    ("label", "is_one"),
    [
        ("part mount", True),
        ("a" * LONGEST_NAME, True),
        ("a" * (LONGEST_NAME + 1), False),
        ("a ", False),
        ("λ", False),
        ("a-b", False),
        ("", False),
    ],
)
def test_labels_are_narrower_than_names(label: str, is_one: bool) -> None:
    assert is_label(label) is is_one


@pytest.mark.parametrize("text", ["1e3", "1.0", "", "٣", "1 000", "9" * 19, "0x1F"])
def test_whole_numbers_are_plain_digits(text: str) -> None:
    with pytest.raises(QuantityError):
        read_whole_number(text)


def test_a_choice_is_one_of_its_words_to_the_letter() -> None:
    assert read_choice("on", ("on", "off")) == "on"
    with pytest.raises(QuantityError, match="'On' is not among the choices"):
        read_choice("On", ("on", "off"))


@pytest.mark.parametrize("given_keys", [[], ["a", "b"]])
def test_exactly_one_of_some_keys_may_stand(given_keys: list[str]) -> None:
    exactly_one(("a", "b"), ["a"])
    with pytest.raises(PydanticCustomError):
        exactly_one(("a", "b"), given_keys)


def schema_of(annotation: Any) -> dict[str, Any]:
    return TypeAdapter(annotation).json_schema()


def test_the_schema_of_a_leaf_has_an_example_of_its_kind_or_its_own() -> None:
    plain = schema_of(Annotated[float, quantity("angle")])
    shown = schema_of(Annotated[float, quantity("angle"), Shown("7 deg")])

    assert (plain["examples"], shown["examples"]) == (["22.5 deg"], ["7 deg"])
    assert plain["pattern"] == shown["pattern"]


def test_the_schema_of_a_choice_lists_its_words() -> None:
    assert schema_of(Annotated[str, choice("left", "2")])["enum"] == ["left", "2", 2]
