"""Types of the texts at the ends of a written file: quantities, choices, names and switches.

It owns how one text becomes one value, and its JSON Schema; a text that will not do raises what was expected.
"""

import re
from collections.abc import Callable, Collection, Sequence
from dataclasses import dataclass
from datetime import date
from typing import Annotated, Any

from pydantic import GetCoreSchemaHandler, GetJsonSchemaHandler, ValidationInfo
from pydantic_core import CoreSchema, PydanticCustomError
from pydantic_core.core_schema import with_info_plain_validator_function

from rigctl.errors import QuantityError
from rigctl.files.mistakes import either, nearest_word, quoted
from rigctl.files.patterns import (
    ADDRESS,
    DATE,
    NAME,
    SWITCH,
    TITLE,
    WHOLE,
    WORD,
    Schema,
    choice_schema,
    measured_schema,
    quantity_schema,
    span_schema,
)
from rigctl.kinds import KINDS
from rigctl.links.addresses import parse_address
from rigctl.quantities import Measured, parse_measured, parse_quantity, parse_span

LONGEST_NAME = 40
"""Characters of a name; names become parts of the run file and columns of tables."""
LONGEST_TITLE = 200
LABEL = f"a letter, then letters A to Z, digits, spaces or '_', at most {LONGEST_NAME} in all"
NAME_RULE = f"a letter, then letters, digits, spaces, '-' or '_', at most {LONGEST_NAME} in all"
WAVELENGTH = "wavelength_m"
"""Key of the validation context that holds the wavelength of the light, m."""


def wrong(what: str, *, expected: str = "", nearest: str = "", key: str = "") -> PydanticCustomError:
    """Make a mistake that is put in its place later; `key` is one below that place, or empty."""
    context = {"what": what, "expected": expected, "nearest": nearest, "key": key}
    return PydanticCustomError("mistake", "{what}", context)


def _text(value: object, expected: str) -> str:
    """Return a text; refuse a list or a mapping that stands in its place."""
    if isinstance(value, str):
        return value
    raise wrong(f"a {'list' if isinstance(value, list) else 'mapping'} stands here", expected=expected)


@dataclass(frozen=True, slots=True, eq=False)
class Leaf:
    """How one text becomes one value: an annotation of a written file's model.

    `read` raises `QuantityError` or what `wrong` makes; `expected` is told where no text stands; `schema` is the
    JSON Schema of the text.
    """

    read: Callable[[str, ValidationInfo], object]
    expected: str
    schema: Schema

    def validate(self, value: object, info: ValidationInfo) -> object:
        """Read a text, and say what was expected where it will not do."""
        text = _text(value, self.expected)
        try:
            return self.read(text, info)
        except QuantityError as error:
            raise wrong(error.what, expected=error.expected, nearest=error.nearest) from error

    def __get_pydantic_core_schema__(self, source: object, handler: GetCoreSchemaHandler) -> CoreSchema:
        """Read the text by `validate`, whatever the type of the value."""
        return with_info_plain_validator_function(self.validate)

    def __get_pydantic_json_schema__(self, core: CoreSchema, handler: GetJsonSchemaHandler) -> Schema:
        """Describe the text."""
        return dict(self.schema)


@dataclass(frozen=True, slots=True, eq=False)
class Shown:
    """An example of its own for one key, in the JSON Schema of its file."""

    example: str

    def __get_pydantic_json_schema__(self, core: CoreSchema, handler: GetJsonSchemaHandler) -> Schema:
        """Put the example in the place of that of the kind."""
        return {**handler(core), "examples": [self.example]}


def _wavelength_m(info: ValidationInfo) -> float | None:
    context: dict[str, Any] = info.context or {}
    return context.get(WAVELENGTH)


def _check_sign(value: float, text: str, *, must_be_positive: bool, kind: str) -> None:
    """Refuse zero and less where a key needs more than its kind does."""
    if must_be_positive and not value > 0:
        raise wrong(f"{quoted(text)} is not above zero", expected=KINDS[kind].phrase)


def quantity(kind: str, *, is_positive: bool = False) -> Leaf:
    """A quantity of a kind, read into its base unit."""

    def read(text: str, info: ValidationInfo) -> float:
        value = parse_quantity(text, kind, wavelength_m=_wavelength_m(info))
        _check_sign(value, text, must_be_positive=is_positive, kind=kind)
        return value

    return Leaf(read, KINDS[kind].phrase, quantity_schema(kind))


def measured(kind: str, *, is_positive: bool = False) -> Leaf:
    """A quantity of a kind with its standard uncertainty, read into its base unit."""

    def read(text: str, info: ValidationInfo) -> Measured:
        value = parse_measured(text, kind, wavelength_m=_wavelength_m(info))
        _check_sign(value.value, text, must_be_positive=is_positive, kind=kind)
        return value

    return Leaf(read, KINDS[kind].phrase, measured_schema(kind))


def span(kind: str) -> Leaf:
    """Two ends of a kind, the lower first."""
    expected = f"a span such as 0 to {KINDS[kind].example}"
    return Leaf(lambda text, _: parse_span(text, kind), expected, span_schema(kind))


def choice(*words: str) -> Leaf:
    """One of a few words."""
    return Leaf(lambda text, _: read_choice(text, words), either(words), choice_schema(words))


def read_name(text: str) -> str:
    """Return a name of an element, role or step; refuse characters that would end an address or a path."""
    if not re.fullmatch(r"[^\W\d_][\w -]*", text) or len(text) > LONGEST_NAME or text != text.strip():
        raise wrong(f"{quoted(text)} is no name", expected=NAME_RULE)
    return text


def is_label(text: str) -> bool:
    """Whether a text may name a role or a step: with `_` for spaces it becomes a name in the run file."""
    return re.fullmatch(r"[A-Za-z][A-Za-z0-9_ ]*", text) is not None and len(text) <= LONGEST_NAME and text[-1] != " "


def _read_title(text: str, _: ValidationInfo) -> str:
    if not text.strip() or len(text) > LONGEST_TITLE:
        raise wrong("the title is empty or too long", expected=f"1 to {LONGEST_TITLE} characters")
    return " ".join(text.split())


def _read_switch(text: str, _: ValidationInfo) -> bool:
    values = {"true": True, "yes": True, "false": False, "no": False}
    if text not in values:
        nearest = nearest_word(text, values)
        raise wrong(f"{quoted(text)} is neither true nor false", expected="true or false", nearest=nearest)
    return values[text]


def _read_date(text: str, _: ValidationInfo) -> date:
    try:
        return date.fromisoformat(text)
    except ValueError as error:
        raise wrong(f"{quoted(text)} is no date", expected="year, month and day such as 2027-03-01") from error


def read_whole_number(text: str) -> int:
    """Return a whole number written in plain digits."""
    if not re.fullmatch(r"[+-]?[0-9]{1,18}", text):
        raise QuantityError(f"{quoted(text)} is no whole number", expected="a number such as 7")
    return int(text)


def read_choice(text: str, words: Collection[str]) -> str:
    """Return one of a few words."""
    if text not in words:
        nearest = nearest_word(text, words)
        raise QuantityError(f"{quoted(text)} is not among the choices", expected=either(words), nearest=nearest)
    return text


def read_text(text: str) -> str:
    """Return a text that is not empty."""
    if not text.strip():
        raise QuantityError("nothing is written here", expected="a word")
    return text


def read_address(text: str) -> str:
    """Return an address; each has one spelling, so that two mentions of one are seen to be the same."""
    plain = str(parse_address(text))
    if plain != text:
        raise QuantityError(
            f"{quoted(text)} is an unusual spelling",
            expected="small letters and no leading zeros",
            nearest=plain,
        )
    return text


def exactly_one(names: Sequence[str], given: Sequence[str], *, key: str = "") -> None:
    """Refuse a mapping that holds none or several of keys of which it must hold one."""
    if len(given) != 1:
        what = f"{' and '.join(map(quoted, given))} exclude each other" if given else "something is missing here"
        raise wrong(what, expected=f"exactly one of {either(map(quoted, names))}", key=key)


NameText = Annotated[str, Leaf(lambda text, _: read_name(text), "a name", NAME), Shown("entry polarizer")]
TitleText = Annotated[str, Leaf(_read_title, "a title", TITLE)]
SwitchText = Annotated[bool, Leaf(_read_switch, "true or false", SWITCH)]
DateText = Annotated[date, Leaf(_read_date, "a date", DATE), Shown("2027-03-01")]
WholeText = Annotated[int, Leaf(lambda text, _: read_whole_number(text), "a whole number", WHOLE), Shown("7")]
WordText = Annotated[str, Leaf(lambda text, _: read_text(text), "a word", WORD)]
AddressText = Annotated[
    str, Leaf(lambda text, _: read_address(text), "an address", ADDRESS), Shown("tcp://10.0.0.7:5025")
]
