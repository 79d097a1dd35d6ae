"""A file of text, keys and lists, with the place of every part; every scalar stays text.

It owns reading and the YAML we accept: no anchors, aliases, tags, merges or keys that are not text. It gives
no meaning to anything: `on`, `no`, `10:30` and `0012` stay what people wrote.
"""

import hashlib
import re
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

import yaml

from rigctl.files.mistakes import Mistakes
from rigctl.files.nodes import Data, Nodes
from rigctl.files.places import Place, Places

LARGEST_BYTES = 1 << 20
"""A file that people write is a few kilobytes; a larger one is not such a file."""

_BOM = "\ufeff"
_NOT_TEXT = re.compile("[\x00-\x08\x0b\x0c\x0e-\x1f\x7f-\x84\x86-\x9f\ufffe\uffff]")


@dataclass(frozen=True, slots=True)
class Document:
    """A file as it was written, its text taken apart, and where each part stands."""

    data: dict[str, Data]
    places: Places
    text: str
    path: str
    sha256: str


def read_document(path: Path, mistakes: Mistakes) -> Document:
    """Read a file; raises `FileError` where it cannot be read on, and gathers the other mistakes."""
    return parse_document(_decode(_read_bytes(path, mistakes), mistakes), mistakes)


def parse_document(text: str, mistakes: Mistakes) -> Document:
    """Take a text apart; raises `FileError` where it cannot be read on, and gathers the other mistakes."""
    _refuse_characters(text, mistakes)
    nodes = Nodes(mistakes)
    for event in _events(text, mistakes):
        nodes.take(event)
    data = nodes.root
    if data is None or data == "":
        mistakes.refuse("the file is empty")
    if not isinstance(data, dict):
        mistakes.stop(nodes.places.of(), "", "the file does not consist of keys", expected="lines such as 'key: value'")
    sha256 = hashlib.sha256(text.encode()).hexdigest()
    return Document(data, nodes.places, text, mistakes.path, sha256)


def _read_bytes(path: Path, mistakes: Mistakes) -> bytes:
    """Read a regular file, and no more of it than is allowed."""
    try:
        if path.exists() and not path.is_file():
            mistakes.refuse("is a folder, not a file" if path.is_dir() else "is not an ordinary file")
        with path.open("rb") as file:
            data = file.read(LARGEST_BYTES + 1)
    except (OSError, ValueError) as error:
        reason = error.strerror if isinstance(error, OSError) and error.strerror else str(error)
        mistakes.refuse(f"cannot be read: {reason.lower()}")
    if len(data) > LARGEST_BYTES:
        mistakes.refuse(f"is larger than {LARGEST_BYTES >> 20} MiB", expected="a file of a few kilobytes")
    return data


def _decode(data: bytes, mistakes: Mistakes) -> str:
    """Decode UTF-8; the text keeps its byte order mark and line ends, so that it is the file."""
    if data.startswith((b"\xff\xfe", b"\xfe\xff")):
        mistakes.refuse("is UTF-16 text", expected="UTF-8: save it again with that encoding")
    try:
        return data.decode()
    except UnicodeDecodeError as error:
        before = data[: error.start].decode()
        what = f"byte 0x{data[error.start]:02x} is not UTF-8"
        mistakes.stop(_place_at(before, len(before)), "", what, expected="UTF-8: save it again with that encoding")


def _refuse_characters(text: str, mistakes: Mistakes) -> None:
    """Refuse tabs and characters that are no text, before the parser trips over them less clearly."""
    if (match := _NOT_TEXT.search(text)) is not None:
        what = f"the character U+{ord(match[0]):04X} is not text"
        mistakes.stop(_place_at(text, match.start()), "", what)
    if (tab := text.find("\t")) >= 0:
        mistakes.stop(_place_at(text, tab), "", "a tab stands here", expected="spaces")


def _place_at(text: str, index: int) -> Place:
    """Line and column of a character, counted from 1; a byte order mark takes no column."""
    lines = f"{text[:index].removeprefix(_BOM)}x".splitlines()
    return len(lines), len(lines[-1])


def _events(text: str, mistakes: Mistakes) -> Iterator[yaml.Event]:
    """Yield what the parser finds; a syntax error ends the reading."""
    try:
        yield from yaml.parse(text, Loader=yaml.SafeLoader)
    except yaml.MarkedYAMLError as error:
        mark = error.problem_mark or error.context_mark
        place = (mark.line + 1, mark.column + 1) if mark else (1, 1)
        mistakes.stop(place, "", f"not readable{_context(error)}: {error.problem}")
    except yaml.reader.ReaderError as error:
        mistakes.stop(_place_at(text, error.position), "", f"not readable: {error.reason}")


def _context(error: yaml.MarkedYAMLError) -> str:
    """Say in what the parser was when it tripped, and where that began."""
    if not error.context or error.context_mark is None:
        return ""
    return f" {error.context} that begins in line {error.context_mark.line + 1}"
