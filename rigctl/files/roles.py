"""The roles of a recipe, as far as they can be read, and whether a part that names one may.

It owns the check of one mention of a role; who mentions roles is the business of others.
"""

from collections.abc import Callable, Collection
from dataclasses import dataclass, field
from typing import get_args

from rigctl.files.labels import STEP
from rigctl.files.leaves import LABEL, is_label
from rigctl.files.mistakes import either, nearest_word, quoted
from rigctl.files.part import Part
from rigctl.files.recipe import BY_HAND
from rigctl.interfaces import RoleKind

RESERVED_ROLES = (BY_HAND, STEP, "repeat", "source")
"""Words that mean something else where a role may stand."""


@dataclass(slots=True)
class Roles:
    """The part of a recipe that declares its roles; `used` gathers those that something needs."""

    part: Part
    used: set[str] = field(default_factory=set)

    def kind(self, name: str) -> str | None:
        """Return the kind of a role; None where it is not declared or cannot be read."""
        role = self.part.at(name)
        return role.text if role.text is not None else role.at("is").text

    def use(self, part: Part, *kinds: str, name: str | None = None, may_be_optional: bool = False) -> str | None:
        """Check that a part names a role of one of some kinds, and return the role where it is declared.

        The name is the part's text, or `name` where the role is the part's key.
        """
        wanted = part.text if name is None else name
        complain = part.wrong if name is None else part.wrong_key
        if wanted is None or not isinstance(self.part.value, dict):
            return None
        if wanted not in self.part.value:
            self._complain_of_unknown(wanted, kinds, complain)
            return None
        self.used.add(wanted)
        found = self.kind(wanted)
        if found in get_args(RoleKind) and found not in kinds:
            complain(f"the role {quoted(wanted)} is a {found}", expected=f"a role that is a {either(kinds)}")
        elif not may_be_optional:
            self._refuse_optional(wanted)
        return wanted

    def check(self) -> None:
        """Check the names of all roles, and that one shutter at most stands before everything else."""
        seen: dict[str, str] = {}
        for name, part in self.part.items().items():
            twin = seen.setdefault(name.replace(" ", "_"), name)
            if not is_label(name):
                part.wrong_key(f"{quoted(name)} is no name of a role", expected=LABEL)
            elif name in RESERVED_ROLES:
                part.wrong_key(f"the word {quoted(name)} has a meaning of its own", expected="another name")
            elif twin != name:
                part.wrong_key(f"the roles {quoted(twin)} and {quoted(name)} differ only by '_'")
        shutters = [name for name in self.part.items() if self.kind(name) == "shutter"]
        for name in shutters[1:]:
            what = f"the role {quoted(name)} is a second shutter beside {quoted(shutters[0])}"
            self.part.at(name).wrong_key(what, expected="one shutter, before everything else in the light's way")

    def check_used(self, kinds: Collection[str]) -> None:
        """Refuse roles of some kinds that nothing uses: most likely a name was mistaken."""
        for name, part in self.part.items().items():
            if name not in self.used and self.kind(name) in kinds:
                what = f"the role {quoted(name)} is a {self.kind(name)} that nothing in the recipe uses"
                part.wrong_key(what, expected="a detector or an element that names it")

    def _complain_of_unknown(self, wanted: str, kinds: Collection[str], complain: Callable[..., None]) -> None:
        """Tell that a role is not declared, and which of the wanted kinds are."""
        names = self.part.items()
        fitting = [name for name in names if self.kind(name) in kinds]
        here = f", here {either(map(quoted, fitting))}" if fitting else ", under 'roles'"
        near = nearest_word(wanted, fitting) or nearest_word(wanted, names)
        complain(
            f"no role is called {quoted(wanted)}", expected=f"a role that is a {either(kinds)}{here}", nearest=near
        )

    def _refuse_optional(self, name: str) -> None:
        """Refuse that a role may be left out without which the recipe measures nothing."""
        optional = self.part.at(name).at("optional")
        if optional.text in ("true", "yes"):
            optional.wrong(f"the role {quoted(name)} cannot be optional: the recipe needs it", expected="false")
