"""Whether a file has the shape of its model, and a mistake with its place where it has not.

It owns the way from a model's complaints to ours; it knows no recipe and no rig.
"""

from collections.abc import Mapping
from types import UnionType
from typing import Annotated, Any, TypeVar, Union, get_args, get_origin

from pydantic import BaseModel, ValidationError
from pydantic_core import ErrorDetails

from rigctl.files.document import Document
from rigctl.files.mistakes import Mistakes, either, nearest_word, quoted
from rigctl.files.places import Keys

M = TypeVar("M", bound=BaseModel)


def shaped(model: type[M], document: Document, mistakes: Mistakes, *, context: Mapping[str, Any]) -> M | None:
    """Return the model of a file, or None after its mistakes were gathered."""
    try:
        return model.model_validate(document.data, context=dict(context))
    except ValidationError as error:
        _Gatherer(model, document, mistakes).gather(error.errors(include_url=False))
        return None


class _Gatherer:
    """Turns the complaints of a model into mistakes of a file."""

    def __init__(self, model: type[BaseModel], document: Document, mistakes: Mistakes) -> None:
        self._model, self._places, self._mistakes = model, document.places, mistakes
        self._meant: set[Keys] = set()

    def gather(self, details: list[ErrorDetails]) -> None:
        """Gather all; a key is not missing where another was most likely meant to be it."""
        for detail in sorted(details, key=lambda d: d["type"] != "extra_forbidden"):
            keys = detail["loc"]
            match detail["type"]:
                case "extra_forbidden":
                    self._unknown_key(keys, detail["input"])
                case "missing":
                    self._missing_key(keys)
                case "mistake":
                    self._leaf(keys, detail["ctx"])
                case _:
                    self._wrong_shape(keys, detail)

    def _unknown_key(self, keys: Keys, value: object) -> None:
        key = str(keys[-1])
        known = keys_of(annotation_at(self._model, keys[:-1]))
        near = nearest_word(key, known)
        self._meant.add((*keys[:-1], near))
        expected = "" if near else either(map(quoted, known))
        if key[0].isdigit() and value == "":
            expected = "a decimal point: a comma ends a value here"
        place = self._places.of_key(*keys)
        self._mistakes.add(place, key, f"unknown key {quoted(key)}", expected=expected, nearest=near)

    def _missing_key(self, keys: Keys) -> None:
        if keys in self._meant:
            return
        key = str(keys[-1])
        owner = next((f" of {quoted(k)}" for k in reversed(keys[:-1]) if isinstance(k, str)), "")
        place = self._places.of_key(*keys[:-1])
        self._mistakes.add_missing(place, key, f"the key {quoted(key)}{owner} is missing")

    def _leaf(self, keys: Keys, context: Mapping[str, str]) -> None:
        below = (context["key"],) if context["key"] else ()
        place = self._places.of(*keys, *below)
        key = str((*keys, *below)[-1]) if keys or below else ""
        expected, nearest = context["expected"], context["nearest"]
        self._mistakes.add(place, key, context["what"], expected=expected, nearest=nearest)

    def _wrong_shape(self, keys: Keys, detail: ErrorDetails) -> None:
        key, given = str(keys[-1]) if keys else "", detail["input"]
        what = f"{quoted(given)} stands here" if given and isinstance(given, str) else f"{noun(given)} stands here"
        expected = _shape_of(annotation_at(self._model, keys))
        self._mistakes.add(self._places.of(*keys), key, what, expected=expected)


def noun(value: object) -> str:
    """Say what a part of a file is."""
    if isinstance(value, str):
        return "a text" if value else "nothing"
    if not value:
        return "an empty list" if isinstance(value, list) else "an empty mapping"
    return "a list" if isinstance(value, list) else "a mapping"


def annotation_at(annotation: Any, keys: Keys) -> Any:
    """Return the type of what stands under these keys of a model."""
    for key in keys:
        annotation = _inside(_bare(annotation), key)
    return _bare(annotation)


def keys_of(annotation: Any) -> tuple[str, ...]:
    """Return the keys that a mapping of this type may have; none where they are free."""
    if not _is_model(annotation):
        return ()
    return tuple(field.alias or name for name, field in annotation.model_fields.items())


def _is_model(annotation: Any) -> bool:
    return isinstance(annotation, type) and issubclass(annotation, BaseModel)


def _bare(annotation: Any) -> Any:
    """Return a type without its annotations and without None."""
    while get_origin(annotation) in (Annotated, Union, UnionType):
        annotation = next(a for a in get_args(annotation) if a is not type(None))
    return annotation


def _inside(annotation: Any, key: str | int) -> Any:
    """Return the type of one entry of a type."""
    if _is_model(annotation):
        fields = annotation.model_fields.items()
        return next((f.annotation for name, f in fields if (f.alias or name) == key), Any)
    return get_args(annotation)[-1] if get_args(annotation) else Any


def _shape_of(annotation: Any) -> str:
    """Say what a type expects."""
    if keys := keys_of(annotation):
        return f"a mapping with keys such as {either(map(quoted, keys[:4]))}"
    if get_origin(annotation) is list:
        return "a list with at least one entry"
    return "keys and their values"
