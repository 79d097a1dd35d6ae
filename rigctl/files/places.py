"""Where each part of a file stands.

It owns lines and columns by the keys that lead to a part; both count from 1.
"""

from collections.abc import Mapping
from dataclasses import dataclass, field

Keys = tuple[str | int, ...]
Place = tuple[int, int]


@dataclass(frozen=True, slots=True)
class Places:
    """Places of values and of keys: `("roles", "signal")` is one part, `("optics", 0)` another."""

    values: Mapping[Keys, Place] = field(default_factory=dict)
    keys: Mapping[Keys, Place] = field(default_factory=dict)

    def of(self, *keys: str | int) -> Place:
        """Place of a value, or of the nearest part above it that is in the file."""
        return self._nearest(self.values, keys)

    def of_key(self, *keys: str | int) -> Place:
        """Place of the key itself; for an entry of a list, of the entry."""
        if keys in self.keys:
            return self.keys[keys]
        return self._nearest(self.values, keys)

    def has(self, *keys: str | int) -> bool:
        """Whether the file has a value under these keys."""
        return keys in self.values

    @staticmethod
    def _nearest(places: Mapping[Keys, Place], keys: Keys) -> Place:
        for end in range(len(keys), -1, -1):
            if keys[:end] in places:
                return places[keys[:end]]
        return (1, 1)
