"""A twin at each address of the rig.

It owns which instruments can stand behind one address, and what each is made with.
"""

import math
from collections import Counter
from collections.abc import Iterator, Mapping

from rigctl import __version__
from rigctl.errors import PlanError
from rigctl.files.rig import InstrumentEntry, Rig
from rigctl.links.channel import Twin
from rigctl_sim.assembly import Assembly, roles_of
from rigctl_sim.current_source import SimulatedCurrentSource, SourceMake
from rigctl_sim.diode import Load
from rigctl_sim.equipment import breaks_at_s
from rigctl_sim.gcode_twin import GcodeTwin
from rigctl_sim.head import Head, HeadBesideBeam, HeadInBeam
from rigctl_sim.keys import CONTROLLER, METER, MOUNT, RELAY, SLIDE, SOURCE, SWITCH, of_bench, of_twin
from rigctl_sim.machine import Machine
from rigctl_sim.noise import normals
from rigctl_sim.power_meter import MeterMake, SimulatedPowerMeter
from rigctl_sim.scpi.rack import Rack
from rigctl_sim.scpi.status import Status
from rigctl_sim.scpi.twin import Device, ScpiTwin
from rigctl_sim.switch import SimulatedSwitch
from rigctl_sim.temperature_controller import FIRST_CURVE, ControllerMake, SimulatedTemperatureController

APERTURES_S = (1e-4, 100.0)
SWITCH_CHANNELS = 8
CONTACTS = (SWITCH, RELAY, SLIDE)
NUMBERED = (SOURCE, CONTROLLER)
"""Drivers whose channels are numeric suffixes; those of `CONTACTS` stand in channel lists."""
_CALLED: Mapping[str, str] = {
    METER: "power meter",
    SOURCE: "current source",
    CONTROLLER: "temperature controller",
    **dict.fromkeys(CONTACTS, "switch"),
}


def twins_of(assembly: Assembly, at_address: Mapping[str, list[InstrumentEntry]]) -> dict[str, Twin]:
    """Return a twin for each address, from the instruments behind it."""
    return {address: _twin(assembly, entries) for address, entries in at_address.items()}


def entries_by_address(rig: Rig) -> dict[str, list[InstrumentEntry]]:
    """Return the instruments behind each address, where they can be one instrument.

    Raises
    ------
    PlanError
        When they cannot.
    """
    at_address: dict[str, list[InstrumentEntry]] = {}
    for entry in rig.instruments.values():
        at_address.setdefault(entry.at, []).append(entry)
    for address, entries in at_address.items():
        drivers = {entry.driver for entry in entries}
        is_one = drivers == {MOUNT} or drivers <= {*CONTACTS, *NUMBERED} or (drivers == {METER} and len(entries) == 1)
        if not is_one:
            raise _refused(rig, address, f"nothing that is {_several(entries)} at one address", "an address")
        for family in ((MOUNT,), CONTACTS, NUMBERED):
            channels = Counter(entry.options["channel"] for entry in entries if entry.driver in family)
            if channels and (most := channels.most_common(1)[0])[1] > 1:
                raise _refused(rig, address, f"only one channel {most[0]} at one address", "a channel")
    return at_address


def _refused(rig: Rig, address: str, what: str, lacking: str) -> PlanError:
    return PlanError(
        f"the simulated bench has {what}",
        where=f"{rig.path}: {address}",
        do=f"Give each of these instruments {lacking} of its own, or rehearse with another rig file.",
    )


def _several(entries: list[InstrumentEntry]) -> str:
    return " and ".join(sorted(entry.driver for entry in entries))


def _twin(assembly: Assembly, entries: list[InstrumentEntry]) -> Twin:
    name = _plain(entries[0].name)
    if entries[0].driver == MOUNT:
        axes = {entry.options["channel"]: assembly.equipment.axes[entry.name] for entry in entries}
        return GcodeTwin(Machine(axes), name=name)
    status = Status()
    called = " and ".join(dict.fromkeys(_CALLED[entry.driver] for entry in entries))
    devices = list(_devices(assembly, entries, status))
    device = devices[0] if len(devices) == 1 else Rack(devices, status)
    return ScpiTwin(device, identity=f"polrig,simulated {called},{name},{__version__}")


def _devices(assembly: Assembly, entries: list[InstrumentEntry], status: Status) -> Iterator[Device]:
    for entry in entries:
        if entry.driver == METER:
            yield _meter(assembly, entry, status)
        elif entry.driver == SOURCE:
            yield _source(assembly, entry, status)
        elif entry.driver == CONTROLLER:
            yield _controller(assembly, entry, status)
    movers = assembly.equipment.movers
    contacts = {entry.options["channel"]: entry.name for entry in entries if entry.driver in CONTACTS}
    if contacts:
        moved = {channel: movers[name] for channel, name in contacts.items() if name in movers}
        yield SimulatedSwitch(max(SWITCH_CHANNELS, *contacts), moved, status=status)


def _source(assembly: Assembly, entry: InstrumentEntry, status: Status) -> SimulatedCurrentSource:
    options, rig = entry.options, assembly.rig
    return SimulatedCurrentSource(
        SourceMake(options["largest current"], options["largest compliance"], options["resolution"]),
        Load(of_twin(rig, entry, "turn-on voltage"), of_twin(rig, entry, "series resistance")),
        assembly.equipment.currents[entry.name],
        channel=options["channel"],
        status=status,
        interlock_opens_at_s=breaks_at_s(rig, entry, "interlock opens after"),
    )


def _controller(assembly: Assembly, entry: InstrumentEntry, status: Status) -> SimulatedTemperatureController:
    options, rig = entry.options, assembly.rig
    make = ControllerMake(
        span_c=options["span"],
        resolution_k=options["resolution"],
        sensor=of_twin(rig, entry, "sensor") or options["thermistor"] or FIRST_CURVE,
        noise_k=of_twin(rig, entry, "noise"),
        sensor_breaks_at_s=breaks_at_s(rig, entry, "sensor breaks after"),
    )
    return SimulatedTemperatureController(
        make,
        assembly.equipment.plants[entry.name],
        normals(assembly.seed, entry.name),
        channel=options["channel"],
        status=status,
    )


def _meter(assembly: Assembly, entry: InstrumentEntry, status: Status) -> SimulatedPowerMeter:
    options, rig = entry.options, assembly.rig
    ranges_w = tuple(sorted(options["ranges"]))
    # as the driver has it: the noise belongs to the smallest range and grows with the full scale
    noise_w = [options["noise"] * full_scale_w / ranges_w[0] for full_scale_w in ranges_w]
    flat_noise_w = of_twin(rig, entry, "noise")
    lag_s = of_twin(rig, entry, "time constant")
    make = MeterMake(
        ranges_w=ranges_w,
        time_constants_s=(options["time constant"] if lag_s is None else lag_s,) * len(ranges_w),
        noise_w=tuple(noise_w) if flat_noise_w is None else (flat_noise_w,) * len(ranges_w),
        relative_noise=_own_noise(rig, entry),
        saturation_w=options["saturation"] or ranges_w[-1],
        apertures_s=APERTURES_S,
    )
    return SimulatedPowerMeter(make, _head(assembly, entry), normals(assembly.seed, entry.name), status=status)


def _own_noise(rig: Rig, entry: InstrumentEntry) -> float:
    """Return the relative noise of a head itself: as written, else what the source leaves of what is declared."""
    written: float | None = of_twin(rig, entry, "relative noise")
    if written is not None:
        return written
    return math.sqrt(max(entry.options["relative noise"] ** 2 - of_bench(rig, "source noise") ** 2, 0.0))


def _head(assembly: Assembly, entry: InstrumentEntry) -> Head:
    names = [detector.name for detector in assembly.train.detectors]
    role = next((role for role in roles_of(assembly.recipe, assembly.rig, entry) if role in names), None)
    if role is None:
        return HeadBesideBeam()
    stray_w = assembly.truth[f"{role}.stray light"]
    return HeadInBeam(assembly.world, names.index(role), stray_w=stray_w)


def _plain(name: str) -> str:
    """Write a name so that it fits into a field of an identity: ASCII, without separators of replies."""
    return "".join(
        letter if letter.isascii() and letter.isprintable() and letter not in ",;[]" else "_" for letter in name
    )
