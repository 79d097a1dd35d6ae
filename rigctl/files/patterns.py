"""JSON Schemas of the texts at the ends of a written file.

It owns patterns that an editor can check. They let pass all that is right and refuse most of what is wrong; what
a text means is known to `rigctl.quantities` alone. They keep to the syntax that Python and ECMAScript share.
"""

import re
from collections.abc import Collection
from typing import Any

from rigctl.kinds import KINDS

Schema = dict[str, Any]

NUMBER = r"[+-]?([0-9]+(\.[0-9]*)?|\.[0-9]+)([eE][+-]?[0-9]+)?"
LABEL_PATTERN = "^[A-Za-z][A-Za-z0-9_ ]{0,39}$"
NAME_PATTERN = "^[A-Za-z\u00c0-\uffff][A-Za-z0-9_\u00c0-\uffff -]{0,39}$"
WORD: Schema = {"type": ["string", "number", "boolean"]}
"""A word; other readers take some for numbers or truth values, as they do 0012 and no."""
TITLE: Schema = WORD
NAME: Schema = {"type": "string", "pattern": NAME_PATTERN}
SWITCH: Schema = {"enum": [True, False, "true", "false", "yes", "no"]}
DATE: Schema = {"type": "string", "pattern": "^[0-9]{4}-[0-9]{2}-[0-9]{2}$"}
WHOLE: Schema = {"type": ["integer", "string"], "pattern": "^[+-]?[0-9]{1,18}$"}
ADDRESS: Schema = {"type": "string", "pattern": "^(tcp|serial|visa)://."}
COUNT: Schema = {"type": ["integer", "string"], "pattern": "^[0-9]+$", "minimum": 1}


def one_of(*keys: str) -> Schema:
    """A mapping that holds exactly one of some keys."""
    return {"oneOf": [{"required": [key]} for key in keys]}


def quantity_schema(*kinds: str) -> Schema:
    """A quantity of one of some kinds."""
    return _texts([_quantity(kind) for kind in kinds], kinds, _phrase(kinds))


def measured_schema(kind: str) -> Schema:
    """A quantity with its uncertainty."""
    tolerance = (
        rf"( *(\+-|\+/-|±) *{NUMBER}( +({_units([*KINDS[kind].unit_names, '%'])}))?( *\( *k *= *{NUMBER} *\))?)?"
    )
    example = f"{KINDS[kind].phrase}, with its standard uncertainty behind +-"
    return _texts([f"{_quantity(kind)}{tolerance}"], (kind,), example)


def span_schema(*kinds: str) -> Schema:
    """Two ends of one of some kinds."""
    patterns = [f"({_quantity(kind)}|{NUMBER}) +to +{_quantity(kind)}" for kind in kinds]
    schema = _texts(patterns, (), f"two ends, the lower first: 0 to {KINDS[kinds[0]].example}")
    return {**schema, "examples": [f"0 to {KINDS[kinds[0]].example}"]}


def choice_schema(words: Collection[str]) -> Schema:
    """One of a few words; digits are numbers to other readers."""
    return {"enum": [*words, *(int(word) for word in words if word.isdecimal())]}


def _texts(patterns: list[str], kinds: Collection[str], description: str) -> Schema:
    may_be_bare = any(not KINDS[kind].needs_unit for kind in kinds)
    examples = [KINDS[kind].example for kind in kinds]
    return {
        "type": ["string", "number"] if may_be_bare else "string",
        "pattern": rf"^ *({'|'.join(patterns)}) *$",
        "description": description,
        "examples": examples,
    }


def _phrase(kinds: Collection[str]) -> str:
    return " or ".join(KINDS[kind].phrase for kind in kinds)


def _quantity(kind: str) -> str:
    row = KINDS[kind]
    if row.name == "ratio":
        return rf"({NUMBER}( +({_units(row.unit_names)}))?|{NUMBER} ?: ?{NUMBER})"
    if not row.unit_names:
        return NUMBER
    unit = f" +({_units(row.unit_names)})"
    return f"{NUMBER}{unit}" if row.needs_unit else f"{NUMBER}({unit})?"


def _units(names: Collection[str]) -> str:
    """The units of a kind; only a caret means something else in a pattern."""
    return "|".join(re.sub(r"\^", r"\\^", name) for name in names)
