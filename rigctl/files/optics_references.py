"""What the optics of a recipe must agree on: names, mounts, unknowns and the detector at the end.

It owns the checks between elements and of elements against roles; it passes over what is missing.
"""

from collections.abc import Collection

from rigctl.files.labels import STEP
from rigctl.files.mistakes import either, nearest_word, quoted
from rigctl.files.part import Part
from rigctl.files.roles import Roles
from rigctl.files.written_optics import PICK_OFF

QUANTITIES = {
    "polarizer": {"axis": "angle", "extinction ratio": "ratio", "dial offset": "angle"},
    "retarder": {
        "axis": "angle",
        "retardance": "retardance",
        "dial offset": "angle",
        "temperature coefficient": "coefficient",
    },
    "pick-off": {"fraction": "ratio"},
    "detector": {"stray light": "power"},
}
"""The quantities of each kind of element, and the kind of each."""
COEFFICIENT = "temperature coefficient"
OWNED = {
    "dial offset": ("turned by", "an element that no mount turns has no dial offset", "'turned by', or 'axis' instead"),
    COEFFICIENT: (
        "warmed by", "an element that nothing warms has no temperature coefficient", "'warmed by'",
    ),
    "reference temperature": ("warmed by", "an element that nothing warms has no reference temperature", "'warmed by'"),
}  # fmt: skip
"""Keys that go with another, what is wrong without it, and what was expected."""


def elements_of(optics: Part) -> list[tuple[str, Part]]:
    """Return kind and part of the elements whose kind can be told."""
    entries = (pair for entry in optics.entries() for pair in entry.items().items())
    return [(kind, part) for kind, part in entries if kind in QUANTITIES]


def name_of(kind: str, part: Part) -> Part:
    """Return the part of an element that names it."""
    named = part.at("role" if kind == "detector" else "name")
    return named.otherwise(PICK_OFF) if kind == "pick-off" else named


def check_optics(optics: Part, roles: Roles) -> None:
    """Gather every mistake between the elements, and between them and the roles."""
    elements = elements_of(optics)
    _check_names(elements, roles)
    for kind, part in elements:
        _check_unknown(kind, part)
        _check_each(kind, part, roles)
        if kind == "detector":
            roles.use(part.at("role"), "power meter")
        elif kind == "pick-off":
            roles.use(part.at("to"), "power meter", may_be_optional=True)
        else:
            _check_mount(part, roles)
            _check_owned(part, roles)
    _check_takers(elements, roles)
    _check_end(optics, elements)


def roles_under(key: str, elements: Collection[tuple[str, Part]]) -> Collection[str]:
    """Return every role that some element names under a key, in the order of the light."""
    found = (part.at(key).text for _, part in elements)
    return dict.fromkeys(role for role in found if role is not None)


def _check_names(elements: list[tuple[str, Part]], roles: Roles) -> None:
    """Refuse names that would give two quantities one address."""
    taken = {"source": "is a name of its own"}
    taken |= dict.fromkeys(roles.part.items(), "is the name of a role")
    for kind, part in elements:
        named = name_of(kind, part)
        _claim(named, taken, is_detector=kind == "detector")
        if kind == "pick-off":
            _claim(part.at("to"), taken, is_detector=True)


def _claim(named: Part, taken: dict[str, str], *, is_detector: bool) -> None:
    """Take a name for an element or detector, unless it is taken."""
    name = named.text
    if name is None:
        return
    if not is_detector and name in taken:
        named.wrong(f"the name {quoted(name)} {taken[name]}", expected="a name for this element alone")
    elif taken.get(name) == "is a detector already":
        named.wrong(f"the role {quoted(name)} is a detector already", expected="a detector for each role")
    line = named.places.of(*named.keys)[0]
    taken[name] = "is a detector already" if is_detector else f"stands already in line {line}"


def _check_unknown(kind: str, part: Part) -> None:
    """Check the names of the quantities that are to be found."""
    seen: set[str] = set()
    for word in part.at("unknown").words():
        name = word.text
        if name is None:
            continue
        if name not in QUANTITIES[kind]:
            word.wrong(f"{quoted(name)} is no quantity of a {kind}", expected=_known(kind), nearest=_near(name, kind))
        elif name in seen:
            word.wrong(f"{quoted(name)} is listed twice")
        elif _lacks_owner(name, part):
            word.wrong(OWNED[name][1], expected=OWNED[name][2])
        seen.add(name)


def _check_each(kind: str, part: Part, roles: Roles) -> None:
    """Check which quantities are found anew at each level, and of what."""
    unknown = {word.text for word in part.at("unknown").words()}
    for name, level in part.at("each").items().items():
        if name not in QUANTITIES[kind]:
            what = f"{quoted(name)} is no quantity of a {kind}"
            level.wrong_key(what, expected=_known(kind), nearest=_near(name, kind))
        elif name not in unknown and kind != "detector" and "+-" not in (part.at(name).text or ""):
            what = f"{quoted(name)} is exact, so it cannot differ"
            level.wrong_key(what, expected="a quantity that is unknown or has a tolerance")
        if name == "retardance" and level.text == part.at("warmed by").text and COEFFICIENT in unknown:
            what = "the coefficient follows from the retardance at each level, so both cannot be found"
            level.wrong(what, expected="'each', or an unknown temperature coefficient")
        if level.text is not None and level.text != STEP:
            roles.use(level, "temperature controller")


def _known(kind: str) -> str:
    return either(map(quoted, QUANTITIES[kind]))


def _near(name: str, kind: str) -> str:
    return nearest_word(name, QUANTITIES[kind])


def _lacks_owner(key: str, part: Part) -> bool:
    return key in OWNED and not part.at(OWNED[key][0]).is_there


def _check_mount(part: Part, roles: Roles) -> None:
    """Check what turns an element, and what it needs when nothing does."""
    mount = part.at("turned by")
    if mount.is_there:
        roles.use(mount, "rotation stage")
    elif part.items() and not part.at("axis").is_there and not part.has_slip_for("axis", "turned by"):
        part.missing("an element that no mount turns needs its 'axis'", expected="a key such as axis: 0 deg")


def _check_owned(part: Part, roles: Roles) -> None:
    """Check what warms an element, and keys that stand there without the one they go with."""
    if part.at("warmed by").is_there:
        roles.use(part.at("warmed by"), "temperature controller")
    for key, (_, what, expected) in OWNED.items():
        if part.at(key).is_there and _lacks_owner(key, part):
            part.at(key).wrong_key(what, expected=expected)


def _check_takers(elements: Collection[tuple[str, Part]], roles: Roles) -> None:
    """Check what takes elements out of the beam: each for one element, and no mount that turns one."""
    mounts = roles_under("turned by", elements)
    taken: set[str] = set()
    for _, element in elements:
        written = element.at("taken out by")
        takers = {written.text: written} if written.text is not None else written.items()
        for name, part in takers.items():
            own_name = None if part.text is not None else name
            complain = part.wrong if own_name is None else part.wrong_key
            roles.use(part, "slide", "rotation stage", name=own_name, may_be_optional=True)
            if name in mounts:
                complain(
                    f"the mount {quoted(name)} turns an element already", expected="a mount of its own, or a slide"
                )
            elif name in taken:
                complain(f"{quoted(name)} takes out another element already", expected="one for each element")
            else:
                _check_ends(part, roles.kind(name))
            taken.add(name)


def _check_ends(part: Part, kind: str | None) -> None:
    """Check that a rotation stage has both of its angles, and a slide none."""
    given = [key for key in ("in", "out") if part.at(key).is_there]
    if kind == "slide" and given:
        part.at(given[0]).wrong_key("a slide knows by itself where in and out are", expected="its name alone")
    elif kind == "rotation stage" and len(given) < 2 and not part.has_slip_for("in", "out"):
        expected = "angles such as {in: 0 deg, out: 90 deg}"
        part.missing("a mount that takes an element out needs both angles", expected=expected)


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
