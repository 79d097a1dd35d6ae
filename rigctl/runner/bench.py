"""The open bench: one link for each address, one instrument for each role that the rig fills.

It owns opening, identifying and closing, and puts sources and controllers behind their limits before anybody may use
them. It gives no command that moves, measures or emits.
"""

from collections.abc import Callable, Collection, Iterator, Mapping
from contextlib import ExitStack, contextmanager
from dataclasses import dataclass, field
from typing import Any

from rigctl.errors import PlanError
from rigctl.files.recipe import Recipe
from rigctl.files.rig import InstrumentEntry, Rig
from rigctl.interfaces import (
    Capabilities,
    Driver,
    Identity,
    Instrument,
    PowerMeter,
    Relay,
    RotationStage,
    Shutter,
    Slide,
)
from rigctl.links.channel import Channel
from rigctl.links.family import Opening
from rigctl.links.link import Link
from rigctl.runner.limits import LimitedController, LimitedSource, controller_limits, cooled_diodes, source_limits
from rigctl.timeline import Timeline

OpenChannel = Callable[[str, Opening], Channel]
"""Opens the channel to an address, as the instrument's family wants it opened; in a rehearsal, to its twin."""

EMITTING = ("current source", "shutter")
"""Kinds of role that decide whether light leaves the bench."""


@dataclass(slots=True)
class OpenBench:
    """Instruments by role, of those roles that the recipe uses and the rig fills."""

    recipe: Recipe
    rig: Rig
    entries: Mapping[str, InstrumentEntry]
    stages: dict[str, RotationStage] = field(default_factory=dict)
    meters: dict[str, PowerMeter] = field(default_factory=dict)
    sources: dict[str, LimitedSource] = field(default_factory=dict)
    controllers: dict[str, LimitedController] = field(default_factory=dict)
    slides: dict[str, Slide] = field(default_factory=dict)
    relays: dict[str, Relay] = field(default_factory=dict)
    shutter: Shutter | None = None
    shutter_role: str = ""
    has_let_light_in: bool = False
    """Whether this run ever told the shutter to open."""
    links: dict[str, Link] = field(default_factory=dict)
    capabilities: dict[str, Capabilities] = field(default_factory=dict)
    instruments: dict[str, Instrument] = field(default_factory=dict)
    """Every instrument by its role, in the order of the recipe, for identifying and reading settings."""

    def link(self, role: str) -> Link:
        """Return the link of the instrument in a role."""
        return self.links[self.entries[role].at]

    def keeps_regulating(self, role: str) -> bool:
        """Whether a controller goes on at the end: as the rig says, else where it cools a diode."""
        wanted = self.rig.on_stop.get(role)
        return role == self.recipe.source.cooled_by if wanted is None else wanted == "keep regulating"

    def may_emit(self) -> bool:
        """Whether this run ever let light in or switched a source on."""
        return self.has_let_light_in or any(source.has_been_on for source in self.sources.values())

    def add(self, role: str, kind: str, instrument: Any) -> None:
        """Put an instrument into its role; a source or controller goes behind its limits."""
        self.instruments[role] = instrument
        self.capabilities[role] = instrument.capabilities
        if kind == "current source":
            limits = source_limits(self.rig, self.entries[role], instrument.capabilities)
            self.sources[role] = LimitedSource(instrument, limits, role)
        elif kind == "temperature controller":
            cooled = cooled_diodes(self.recipe, self.rig, role)
            bounds = controller_limits(self.rig, self.entries[role], instrument.capabilities, cooled=cooled)
            self.controllers[role] = LimitedController(instrument, bounds, role)
        elif kind == "shutter":
            self.shutter, self.shutter_role = instrument, role
        else:
            by_kind: Mapping[str, dict[str, Any]] = {
                "rotation stage": self.stages,
                "power meter": self.meters,
                "slide": self.slides,
                "relay": self.relays,
            }
            by_kind[kind][role] = instrument


def filled_roles(recipe: Recipe, rig: Rig) -> Mapping[str, InstrumentEntry]:
    """Return the rig's entry for each role of the recipe that it fills."""
    found = {role: rig.entry(role) for role in recipe.roles}
    return {role: entry for role, entry in found.items() if entry is not None}


def emitting_roles(recipe: Recipe, rig: Rig) -> tuple[str, ...]:
    """Return the filled roles that decide whether light leaves the bench."""
    return tuple(role for role in filled_roles(recipe, rig) if recipe.roles[role].kind in EMITTING)


def declared_capabilities(recipe: Recipe, rig: Rig, drivers: Mapping[str, Driver]) -> Mapping[str, Capabilities]:
    """Return what the instrument in each filled role can do, from the rig file alone."""
    entries = filled_roles(recipe, rig)
    return {role: drivers[entry.driver].capabilities(entry.options) for role, entry in entries.items()}


@contextmanager
def open_bench(
    recipe: Recipe,
    rig: Rig,
    drivers: Mapping[str, Driver],
    *,
    open_channel: OpenChannel,
    timeline: Timeline,
    only: Collection[str] | None = None,
) -> Iterator[OpenBench]:
    """Open every instrument that the recipe needs; every link is closed at the end, whatever happens.

    Parameters
    ----------
    only
        Roles to open; None opens all that are filled.
    """
    entries = filled_roles(recipe, rig)
    bench = OpenBench(recipe, rig, {role: e for role, e in entries.items() if only is None or role in only})
    with ExitStack() as stack:
        for role, entry in bench.entries.items():
            driver = drivers[entry.driver]
            if entry.at not in bench.links:
                bench.links[entry.at] = _link(entry, driver, open_channel, timeline=timeline)
                stack.callback(bench.links[entry.at].close)
            link = bench.links[entry.at]
            if link.family != driver.family:
                raise PlanError(
                    f"'{entry.name}' speaks another language than the instrument that shares its address {entry.at}",
                    where=rig.path,
                    do="Give each of them its own address.",
                )
            bench.add(role, driver.kind, driver.open(link, entry.options))
        yield bench


def _link(entry: InstrumentEntry, driver: Driver, open_channel: OpenChannel, *, timeline: Timeline) -> Link:
    return Link(entry.at, lambda: open_channel(entry.at, driver.family.opening), driver.family, timeline)


def identify_all(bench: OpenBench) -> Mapping[str, Identity]:
    """Ask every instrument who it is, by role; shutters first, so that a bench that fails later is dark."""
    roles = sorted(bench.instruments, key=lambda role: role != bench.shutter_role)
    return {role: bench.instruments[role].identify() for role in roles}
