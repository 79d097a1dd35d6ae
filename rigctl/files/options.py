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
from rigctl.quantities import parse_quantity, parse_span

_LIST, _SPAN = "list of ", "span of "


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
    if option.kind.startswith(_LIST):
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
    if option.kind == "whole number":
        return read_whole_number
    if option.kind == "choice":
        return lambda text: read_choice(text, option.choices)
    if option.kind.startswith(_SPAN):
        return lambda text: parse_span(text, option.kind.removeprefix(_SPAN))
    return lambda text: parse_quantity(text, option.kind.removeprefix(_LIST))
