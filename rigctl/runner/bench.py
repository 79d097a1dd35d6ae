"""The open bench: one link for each address, one instrument for each role that the rig fills.

It owns opening, identifying and closing. It gives no command that moves or measures.
"""

from collections.abc import Callable, Iterator, Mapping
from contextlib import ExitStack, contextmanager
from dataclasses import dataclass, field
from typing import cast

from rigctl.errors import PlanError
from rigctl.files.recipe import Recipe
from rigctl.files.rig import InstrumentEntry, Rig
from rigctl.interfaces import Capabilities, Driver, Identity, Instrument, PowerMeter, RotationStage, Shutter
from rigctl.links.channel import Channel
from rigctl.links.link import Link
from rigctl.timeline import Timeline

OpenChannel = Callable[[str], Channel]
"""Opens the channel to an address: a socket on hardware, a twin in a rehearsal."""


@dataclass(slots=True)
class OpenBench:
    """Instruments by role, of those roles that the recipe uses and the rig fills."""

    entries: Mapping[str, InstrumentEntry]
    stages: dict[str, RotationStage] = field(default_factory=dict)
    meters: dict[str, PowerMeter] = field(default_factory=dict)
    shutter: Shutter | None = None
    shutter_role: str = ""
    has_let_light_in: bool = False
    """Whether this run ever told the shutter to open."""
    links: dict[str, Link] = field(default_factory=dict)

    def instruments(self) -> Iterator[tuple[str, Instrument]]:
        """Yield every instrument with its role: shutter, mounts, meters."""
        if self.shutter is not None:
            yield self.shutter_role, self.shutter
        yield from self.stages.items()
        yield from self.meters.items()

    def link(self, role: str) -> Link:
        """Return the link of the instrument in a role."""
        return self.links[self.entries[role].at]

    def add(self, role: str, kind: str, instrument: Instrument) -> None:
        """Put an instrument into its role."""
        if kind == "rotation stage":
            self.stages[role] = cast(RotationStage, instrument)
        elif kind == "power meter":
            self.meters[role] = cast(PowerMeter, instrument)
        else:
            self.shutter, self.shutter_role = cast(Shutter, instrument), role


def filled_roles(recipe: Recipe, rig: Rig) -> Mapping[str, InstrumentEntry]:
    """Return the rig's entry for each role of the recipe that it fills."""
    found = {role: rig.entry(role) for role in recipe.roles}
    return {role: entry for role, entry in found.items() if entry is not None}


def declared_capabilities(recipe: Recipe, rig: Rig, drivers: Mapping[str, Driver]) -> Mapping[str, Capabilities]:
    """Return what the instrument in each filled role can do, from the rig file alone."""
    entries = filled_roles(recipe, rig)
    return {role: drivers[entry.driver].capabilities(entry.options) for role, entry in entries.items()}


@contextmanager
def open_bench(
    recipe: Recipe, rig: Rig, drivers: Mapping[str, Driver], *, open_channel: OpenChannel, timeline: Timeline
) -> Iterator[OpenBench]:
    """Open every instrument that the recipe needs; every link is closed at the end, whatever happens."""
    bench = OpenBench(filled_roles(recipe, rig))
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
    return Link(entry.at, lambda: open_channel(entry.at), driver.family, timeline)


def identify_all(bench: OpenBench) -> Mapping[str, Identity]:
    """Ask every instrument who it is, by role."""
    return {role: instrument.identify() for role, instrument in bench.instruments()}
