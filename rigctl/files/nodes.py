"""Text, keys and lists from a parser's events, one after another.

It owns the shape of a file and refuses what no file of ours may have; it never recurses, so that no file can
exhaust the stack.
"""

from dataclasses import dataclass
from typing import TypeAlias, Union

import yaml

from rigctl.files.mistakes import Mistakes, quoted
from rigctl.files.places import Keys, Place, Places

DEEPEST = 12
"""Levels of keys and lists; recipes and rig files need six."""

_YAML_TAG = "tag:yaml.org,2002:"

Data: TypeAlias = Union[str, "list[Data]", "dict[str, Data]"]


@dataclass(slots=True)
class _Open:
    """A mapping or list whose end has not come yet; `keys` is None where nothing of it is kept."""

    held: "list[Data] | dict[str, Data]"
    keys: Keys | None
    key: str | None = None
    is_key_next: bool = True


class Nodes:
    """Builds the data of one file; mistakes are gathered, and what they spoil is left out."""

    def __init__(self, mistakes: Mistakes) -> None:
        self.root: Data | None = None
        self._values: dict[Keys, Place] = {}
        self._keys: dict[Keys, Place] = {}
        self.places = Places(self._values, self._keys)
        self._mistakes = mistakes
        self._open: list[_Open] = []
        self._documents = 0

    def take(self, event: yaml.Event) -> None:
        """Take the next event of the parser."""
        mark = event.start_mark
        place = (mark.line + 1, mark.column + 1) if mark else (1, 1)
        if isinstance(event, yaml.NodeEvent):
            self._refuse_marks(event, place)
        if isinstance(event, yaml.DocumentStartEvent):
            self._start_document(place)
        elif isinstance(event, yaml.CollectionStartEvent):
            self._start(event, place)
        elif isinstance(event, yaml.CollectionEndEvent):
            self._open.pop()
        elif isinstance(event, yaml.ScalarEvent):
            self._scalar(event.value, place)
        elif isinstance(event, yaml.AliasEvent):
            self._scalar("", place)

    def _start_document(self, place: Place) -> None:
        self._documents += 1
        if self._documents > 1:
            self._mistakes.stop(place, "", "a second document begins here", expected="one document in a file")

    def _refuse_marks(self, event: yaml.NodeEvent, place: Place) -> None:
        """Refuse anchors, aliases and tags."""
        if isinstance(event, yaml.AliasEvent):
            what, expected = f"the alias '*{event.anchor}' repeats another part", "the part written out"
            self._mistakes.add(place, "", what, expected=expected)
        elif event.anchor is not None:
            self._mistakes.add(place, "", f"the anchor '&{event.anchor}' is not allowed", expected="the value alone")
        tag = getattr(event, "tag", None)
        if tag is not None:
            self._mistakes.add(
                place,
                "",
                f"the tag {quoted(tag.replace(_YAML_TAG, '!!'))} is not allowed",
                expected="the value alone",
            )

    def _start(self, event: yaml.CollectionStartEvent, place: Place) -> None:
        """Open a mapping or a list."""
        if len(self._open) >= DEEPEST:
            self._mistakes.stop(place, "", f"more than {DEEPEST} levels of keys and lists")
        held: list[Data] | dict[str, Data] = {} if isinstance(event, yaml.MappingStartEvent) else []
        if self._is_key_next:
            self._refuse_key(place)
            self._open.append(_Open(held, None))
        else:
            self._open.append(_Open(held, self._put(held, place)))

    def _scalar(self, value: str, place: Place) -> None:
        """Take a key or a text."""
        if self._is_key_next:
            self._take_key(value, place)
        else:
            self._put(value, place)

    @property
    def _is_key_next(self) -> bool:
        return bool(self._open) and isinstance(self._open[-1].held, dict) and self._open[-1].is_key_next

    def _take_key(self, key: str, place: Place) -> None:
        """Take a key of the innermost mapping, unless it cannot be one."""
        top = self._open[-1]
        top.is_key_next, top.key = False, None
        if top.keys is None:
            return
        if key == "<<":
            self._mistakes.add(place, key, "merging with '<<' is not allowed", expected="the keys written out")
        elif not key:
            self._mistakes.add(place, key, "a key is missing before ':'", expected="a word")
        elif key in top.held:
            first = self._keys[(*top.keys, key)]
            self._mistakes.add(place, key, f"the key {quoted(key)} stands already in line {first[0]}")
        else:
            top.key = key
            self._keys[(*top.keys, key)] = place

    def _refuse_key(self, place: Place) -> None:
        """Refuse a mapping or list that stands where a key must."""
        top = self._open[-1]
        top.is_key_next, top.key = False, None
        if top.keys is not None:
            self._mistakes.add(place, "", "a list or mapping stands in place of a key", expected="a word")

    def _put(self, value: Data, place: Place) -> Keys | None:
        """Put a value where it belongs and return the keys that lead there; None where it is not kept."""
        if not self._open:
            self.root = value
            return self._at((), place)
        top = self._open[-1]
        if isinstance(top.held, list):
            top.held.append(value)
            return None if top.keys is None else self._at((*top.keys, len(top.held) - 1), place)
        top.is_key_next = True
        if top.keys is None or top.key is None:
            return None
        top.held[top.key] = value
        return self._at((*top.keys, top.key), place)

    def _at(self, keys: Keys, place: Place) -> Keys:
        self._values[keys] = place
        return keys
