"""The keys that a driver or the simulated bench adds to a rig file, read by their tables.

It owns the way from a written text to the value that an `Option` asks for.
"""

from collections.abc import Callable, Collection, Mapping
from typing import Any

from rigctl.errors import QuantityError
from rigctl.files.leaves import read_choice, read_text, read_whole_number
from rigctl.files.mistakes import either, nearest_word, quoted
from rigctl.files.part import Part
from rigctl.files.shape import noun
from rigctl.interfaces import Option
from rigctl.kinds import KINDS
from rigctl.quantities import parse_quantity, parse_span
from rigctl.thermistor import parse_thermistor

LIST, SPAN, WHOLE = "list of ", "span of ", "whole number"


def read_options(part: Part, table: Mapping[str, Option], *, others: Collection[str], whose: str) -> dict[str, Any]:
    """Read the keys of a mapping by a table; defaults stand for what is not written.

    `others` are keys that are read elsewhere; `whose` says in a message who knows the keys.
    """
    known = dict.fromkeys((*table, *others))
    for key, value in part.items().items():
        if key not in known:
            near = nearest_word(key, known)
            expected = "" if near else _known(known, whose)
            value.wrong_key(f"unknown key {quoted(key)} of {whose}", expected=expected, nearest=near)
    return {key: _value(part.at(key), option) for key, option in table.items()}


def _known(known: Collection[str], whose: str) -> str:
    return either(map(quoted, known)) if known else f"none: {whose} has no keys"


def _value(part: Part, option: Option) -> Any:
    """Read one value; the default stands where nothing, or a mistake, is written."""
    if not part.is_there:
        return option.default
    parse = _parser(option)
    if option.kind.startswith(LIST):
        if not part.words():
            part.wrong(f"{noun(part.value)} stands here", expected="a list with at least one entry")
        return tuple(_parsed(entry, parse) for entry in part.words())
    value = _parsed(part, parse)
    return option.default if value is None else value


def _parsed(part: Part, parse: Callable[[str], Any]) -> Any:
    """Parse a text; note a mistake and return None where it will not do."""
    if part.text is None:
        part.wrong(f"{noun(part.value)} stands here", expected="a single value")
        return None
    try:
        return parse(part.text)
    except QuantityError as error:
        part.wrong(error.what, expected=error.expected, nearest=error.nearest)
        return None


def _parser(option: Option) -> Callable[[str], Any]:
    """Return what reads one text of an option."""
    if option.kind == "text":
        return read_text
    if option.kind == "thermistor":
        return parse_thermistor
    if option.kind == "choice":
        return lambda text: read_choice(text, option.choices)
    if option.kind.startswith(SPAN):
        return lambda text: parse_span(text, option.kind.removeprefix(SPAN))
    return lambda text: _signed(text, option)


def _signed(text: str, option: Option) -> float:
    """Read a number or a quantity, and refuse one below what the option allows."""
    kind = option.kind.removeprefix(LIST)
    value = read_whole_number(text) if kind == WHOLE else parse_quantity(text, kind)
    expected = "a number such as 1" if kind == WHOLE else KINDS[kind].phrase
    if option.sign == "positive" and not value > 0:
        raise QuantityError(f"{quoted(text)} is not above zero", expected=expected)
    if option.sign == "not negative" and value < 0:
        raise QuantityError(f"{quoted(text)} is negative", expected=expected)
    return value
