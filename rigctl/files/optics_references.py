"""What the optics of a recipe must agree on: names, mounts, unknowns and the detector at the end.

It owns the checks between elements and of elements against roles; it passes over what is missing.
"""

from collections.abc import Collection, Iterator

from rigctl.files.mistakes import either, nearest_word, quoted
from rigctl.files.part import Part
from rigctl.files.roles import Roles

QUANTITIES = {
    "polarizer": ("axis", "extinction ratio", "dial offset"),
    "retarder": ("axis", "retardance", "dial offset"),
    "detector": ("stray light",),
}
"""What may be unknown of each kind of element."""


def check_optics(optics: Part, roles: Roles) -> None:
    """Gather every mistake between the elements, and between them and the roles."""
    elements = list(_elements(optics))
    _check_names(elements, roles)
    for kind, part in elements:
        _check_unknown(kind, part)
        if kind == "detector":
            roles.use(part.at("role"), "power meter")
        else:
            _check_mount(part, roles)
    _check_end(optics, elements)


def mounts_of(optics: Part) -> Collection[str]:
    """Return every role that turns an element, in the order of the light."""
    mounts = (part.at("turned by").text for _, part in _elements(optics))
    return dict.fromkeys(mount for mount in mounts if mount is not None)


def _elements(optics: Part) -> Iterator[tuple[str, Part]]:
    """Yield the elements whose kind can be told."""
    for entry in optics.entries():
        for kind, part in entry.items().items():
            if kind in QUANTITIES:
                yield kind, part


def _check_names(elements: list[tuple[str, Part]], roles: Roles) -> None:
    """Refuse names that would give two quantities one address."""
    taken = {"source": "is a name of its own"}
    taken |= dict.fromkeys(roles.part.items(), "is the name of a role")
    for kind, part in elements:
        named = part.at("role" if kind == "detector" else "name")
        name = named.text
        if name is None:
            continue
        if kind != "detector" and name in taken:
            named.wrong(f"the name {quoted(name)} {taken[name]}", expected="a name for this element alone")
        elif taken.get(name) == "is a detector already":
            named.wrong(f"the role {quoted(name)} is a detector already", expected="a detector for each role")
        line = named.places.of(*named.keys)[0]
        taken[name] = "is a detector already" if kind == "detector" else f"stands already in line {line}"


def _check_unknown(kind: str, part: Part) -> None:
    """Check the names of the quantities that are to be found."""
    known = QUANTITIES[kind]
    seen: set[str] = set()
    for word in part.at("unknown").words():
        name = word.text
        if name is None:
            continue
        if name not in known:
            what = f"{quoted(name)} is no quantity of a {kind}"
            word.wrong(what, expected=either(map(quoted, known)), nearest=nearest_word(name, known))
        elif name in seen:
            word.wrong(f"{quoted(name)} is listed twice")
        elif name == "dial offset" and not part.at("turned by").is_there:
            word.wrong("an element that no mount turns has no dial offset", expected="'turned by', or 'axis' instead")
        seen.add(name)


def _check_mount(part: Part, roles: Roles) -> None:
    """Check what turns an element, and what it needs when nothing does."""
    mount = part.at("turned by")
    if mount.is_there:
        roles.use(mount, "rotation stage")
        return
    if part.at("dial offset").is_there:
        what = "an element that no mount turns has no dial offset"
        part.at("dial offset").wrong_key(what, expected="'turned by', or 'axis' instead")
    if part.items() and not part.at("axis").is_there and not part.has_slip_for("axis", "turned by"):
        part.missing("an element that no mount turns needs its 'axis'", expected="a key such as axis: 0 deg")


def _check_end(optics: Part, elements: list[tuple[str, Part]]) -> None:
    """Check that the light ends on a detector."""
    kinds = [kind for kind, _ in elements]
    if "detector" not in kinds:
        if len(elements) == len(optics.entries()) > 0:
            optics.missing("the light ends on no detector", expected="a last entry such as detector: {role: signal}")
        return
    for kind, part in elements[kinds.index("detector") :]:
        if kind != "detector":
            part.wrong_key(f"a {kind} stands behind the detector", expected="detectors at the end of the optics")
