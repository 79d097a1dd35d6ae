"""What one part of a rig file means for another, and for the drivers that are installed.

It owns the checks of instruments against drivers, of roles against instruments, and of shared addresses; it
passes over what is missing.
"""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from rigctl.files.leaves import LABEL, is_label
from rigctl.files.mistakes import either, nearest_word, quoted
from rigctl.files.options import read_options
from rigctl.files.part import Part
from rigctl.interfaces import BenchFactory, Driver, RoleKind

LIMITS: Mapping[RoleKind, tuple[str, ...]] = {
    "power meter": ("power",),
    "current source": ("current", "compliance"),
    "temperature controller": ("temperature",),
}
"""What an instrument of a kind may be kept from exceeding."""
ALL_LIMITS = [key for keys in LIMITS.values() for key in keys]
SHARED_KEYS = ("driver", "at", "limits", "calibration")
"""Keys of an instrument whatever its driver."""


@dataclass(frozen=True, slots=True)
class Extras:
    """What drivers and the simulated bench read from a rig file beyond the keys that all have."""

    options: Mapping[str, Mapping[str, Any]]
    bench: Mapping[str, Any]
    twins: Mapping[str, Mapping[str, Any]]


def read_extras(rig: Part, drivers: Mapping[str, Driver], bench: BenchFactory | None) -> Extras:
    """Gather every mistake between the parts of a rig file, and read what its plugins add."""
    instruments = rig.at("instruments")
    found = {name: _driver(part, drivers) for name, part in instruments.items().items()}
    known = {name: driver for name, driver in found.items() if driver is not None}
    options = {name: _options(instruments.at(name), driver) for name, driver in known.items()}
    _check_addresses(instruments, known, options)
    if instruments.items():
        _check_roles(rig.at("roles"), instruments)
        _check_diodes(rig.at("diodes"), instruments, known)
    _check_on_stop(rig, known)
    if bench is None:
        return Extras(options, {}, {})
    return Extras(options, *_simulated(rig, known, bench))


def _driver(instrument: Part, drivers: Mapping[str, Driver]) -> Driver | None:
    """Return the driver of an instrument; None where it is not installed or not written."""
    part = instrument.at("driver")
    if part.text is None or part.text in drivers:
        return drivers.get(part.text or "")
    expected = f"one that is installed: {either(sorted(drivers))}" if drivers else "an installed driver; there is none"
    nearest = nearest_word(part.text, drivers)
    part.wrong(f"no driver is called {quoted(part.text)}", expected=expected, nearest=nearest)
    return None


def _options(instrument: Part, driver: Driver) -> dict[str, Any]:
    """Read an instrument's keys by its driver's table."""
    _check_limits(instrument.at("limits"), driver.kind)
    return read_options(instrument, driver.options, others=SHARED_KEYS, whose=f"the driver {driver.name}")


def _check_limits(limits: Part, kind: RoleKind) -> None:
    """Refuse limits that a kind of instrument does not have."""
    known = LIMITS.get(kind, ())
    if limits.is_there and not known:
        limits.wrong_key(f"a {kind} has no limits here", expected=f"limits at a {either(LIMITS)}")
    elif limits.is_there and limits.value in ({}, ""):
        limits.wrong("no limit stands here", expected=either(map(quoted, known)))
    for key, part in limits.items().items():
        if known and key not in known and key in ALL_LIMITS:
            part.wrong_key(f"a {kind} has no limit of {key}", expected=either(map(quoted, known)))


def _check_addresses(
    instruments: Part, drivers: Mapping[str, Driver], options: Mapping[str, Mapping[str, Any]]
) -> None:
    """Refuse one address for two languages, and one instrument written twice."""
    seen: dict[str, str] = {}
    for name, driver in drivers.items():
        at = instruments.at(name).at("at")
        first = seen.setdefault(at.text or name, name)
        if first == name:
            continue
        if drivers[first].family.name != driver.family.name:
            what = f"{quoted(name)} and {quoted(first)} share an address but not a language"
            at.wrong(what, expected="an address for each, or drivers of one family")
        elif drivers[first] is driver and options[first] == options[name]:
            at.wrong(f"{quoted(name)} is the same as {quoted(first)}", expected="another address or channel")


def _check_roles(roles: Part, instruments: Part) -> None:
    """Refuse roles that no recipe can have, or that nothing fills.

    One instrument may fill several: those of recipes that are run in turn.
    """
    names = instruments.items()
    for role, part in roles.items().items():
        if not is_label(role):
            part.wrong_key(f"{quoted(role)} is no name of a role", expected=LABEL)
        name = part.text
        if name is None:
            continue
        if name not in names:
            what, known = f"no instrument is called {quoted(name)}", either(map(quoted, names))
            part.wrong(what, expected=f"one of {known}", nearest=nearest_word(name, names))


def _check_diodes(diodes: Part, instruments: Part, drivers: Mapping[str, Driver]) -> None:
    """Refuse a diode on what is no current source, and two diodes on one."""
    sources = [name for name, driver in drivers.items() if driver.kind == "current source"]
    driven: dict[str, str] = {}
    for diode, entry in diodes.items().items():
        part = entry.at("on")
        name = part.text
        if name is None:
            continue
        expected = f"a current source, here {either(map(quoted, sources))}" if sources else "a current source"
        if name not in instruments.items():
            what = f"no instrument is called {quoted(name)}"
            part.wrong(what, expected=expected, nearest=nearest_word(name, sources))
        elif name in drivers and name not in sources:
            part.wrong(f"{quoted(name)} is a {drivers[name].kind}", expected=expected)
        elif name in driven:
            what = f"{quoted(name)} drives {quoted(driven[name])} already"
            part.wrong(what, expected="one diode on each source: that which is on the bench")
        driven[name] = diode


def _check_on_stop(rig: Part, drivers: Mapping[str, Driver]) -> None:
    """Refuse to say what is done at the end with what is no temperature controller."""
    roles = rig.at("roles").items()
    for role, part in rig.at("on stop").items().items():
        if role not in roles:
            near = nearest_word(role, roles)
            part.wrong_key(f"the rig fills no role {quoted(role)}", expected="a role of this rig", nearest=near)
        elif (driver := drivers.get(roles[role].text or "")) and driver.kind != "temperature controller":
            what = f"the role {quoted(role)} is filled by a {driver.kind}"
            part.wrong_key(what, expected="a temperature controller: the others are always switched off")


def _simulated(
    rig: Part, drivers: Mapping[str, Driver], bench: BenchFactory
) -> tuple[Mapping[str, Any], Mapping[str, Mapping[str, Any]]]:
    """Read what is said of the simulated bench and of each twin; defaults stand for what is not written."""
    simulated, instruments = rig.at("simulated"), rig.at("instruments")
    others = ("seed", *instruments.items())
    world = read_options(simulated, bench.bench_options(), others=others, whose="the simulated bench")
    twins = {}
    for name, driver in drivers.items():
        part = simulated.at(name)
        if part.is_there and not isinstance(part.value, dict):
            part.wrong("no keys stand here", expected="a mapping")
        table = bench.twin_options(driver.name)
        twins[name] = read_options(part, table, others=(), whose=f"a simulated {driver.name}")
    return world, twins
