"""One part of a file with its place, for checks that must work on a file that has other mistakes.

It owns the lenient look: what is not there, or is of another shape, is an empty part.
"""

from dataclasses import dataclass, replace

from rigctl.files.document import Document
from rigctl.files.mistakes import Mistakes, nearest_word
from rigctl.files.nodes import Data
from rigctl.files.places import Keys, Places


@dataclass(frozen=True, slots=True)
class Part:
    """What stands under some keys of a file; `value` is None where nothing does."""

    value: Data | None
    keys: Keys
    places: Places
    mistakes: Mistakes

    @classmethod
    def whole(cls, document: Document, mistakes: Mistakes) -> "Part":
        """Return the whole of a file."""
        return cls(document.data, (), document.places, mistakes)

    @property
    def key(self) -> str:
        """The last text key that leads here."""
        return next((key for key in reversed(self.keys) if isinstance(key, str)), "")

    @property
    def text(self) -> str | None:
        """The text, or None where something else stands."""
        return self.value if isinstance(self.value, str) else None

    @property
    def is_there(self) -> bool:
        """Whether anything stands here."""
        return self.value is not None

    def at(self, key: str) -> "Part":
        """Return what stands under one key."""
        value = self.value.get(key) if isinstance(self.value, dict) else None
        return Part(value, (*self.keys, key), self.places, self.mistakes)

    def otherwise(self, text: str) -> "Part":
        """Return this part, or a text in its place where nothing stands."""
        return self if self.is_there else replace(self, value=text)

    def items(self) -> dict[str, "Part"]:
        """Return the parts of a mapping by key; none where no mapping stands."""
        return {key: self.at(key) for key in self.value} if isinstance(self.value, dict) else {}

    def entries(self) -> list["Part"]:
        """Return the parts of a list; none where no list stands."""
        if not isinstance(self.value, list):
            return []
        return [Part(v, (*self.keys, i), self.places, self.mistakes) for i, v in enumerate(self.value)]

    def words(self) -> list["Part"]:
        """Return the entries of a list, or the text alone as its only entry."""
        return [self] if self.text is not None else self.entries()

    def has_slip_for(self, *keys: str) -> bool:
        """Whether some key of a mapping is most likely one of these, mistyped, and told as such."""
        return any(key not in keys and nearest_word(key, keys) for key in self.items())

    def wrong(self, what: str, *, expected: str = "", nearest: str = "") -> None:
        """Note a mistake at the value."""
        self.mistakes.add(self.places.of(*self.keys), self.key, what, expected=expected, nearest=nearest)

    def missing(self, what: str, *, expected: str = "") -> None:
        """Note that something is missing in this part."""
        self.mistakes.add_missing(self.places.of_key(*self.keys), self.key, what, expected=expected)

    def wrong_key(self, what: str, *, expected: str = "", nearest: str = "") -> None:
        """Note a mistake at the key."""
        self.mistakes.add(self.places.of_key(*self.keys), self.key, what, expected=expected, nearest=nearest)
