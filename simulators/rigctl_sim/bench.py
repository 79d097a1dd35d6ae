"""The simulated bench: one world, and a twin at each address of the rig.

It owns what stands where. The factory at the end is what the rest of polrig finds it by.
"""

from collections.abc import Mapping
from typing import Any

from rigctl import __version__
from rigctl.errors import PlanError
from rigctl.files.arrangement import train_of
from rigctl.files.recipe import Recipe
from rigctl.files.rig import InstrumentEntry, Rig
from rigctl.interfaces import BenchFactory, Option, RoleKind
from rigctl.links.channel import Twin
from rigctl.optics import reader
from rigctl_sim.default_rig import default_rig
from rigctl_sim.gcode_twin import GcodeTwin
from rigctl_sim.head import Head, HeadBesideBeam, HeadInBeam
from rigctl_sim.machine import Axis, AxisMake, Machine
from rigctl_sim.noise import generator, normals
from rigctl_sim.power_meter import MeterMake, SimulatedPowerMeter
from rigctl_sim.scpi.twin import ScpiTwin
from rigctl_sim.switch import SimulatedShutter, SimulatedSwitch
from rigctl_sim.trajectory import Trajectory
from rigctl_sim.truth import draw_truth
from rigctl_sim.world import Mount, Source, World

MOUNT, METER, SWITCH = "gcode-rotary", "scpi-power-meter", "scpi-switch"
CLOCKWISE = "clockwise to an eye facing the light"
HOMED_BY_RUN = "at start"
APERTURES_S = (1e-4, 100.0)
SWITCH_CHANNELS = 8

BENCH_OPTIONS: Mapping[str, Option] = {
    "power": Option("power", meaning="true power of the source at the start of the run"),
    "drift": Option("drift", meaning="true drift of the source's power"),
}
TWIN_OPTIONS: Mapping[str, Mapping[str, Option]] = {
    METER: {
        "noise": Option("power", meaning="standard deviation of a reading in the dark, on any range"),
        "relative noise": Option("ratio", meaning="standard deviation that grows with the power"),
        "time constant": Option("time", meaning="true lag of the head"),
        "stray light": Option("power", meaning="true light that reaches the head beside the beam"),
    },
    MOUNT: {},
    SWITCH: {},
}


class SimulatedBench:
    """A world with twins around it."""

    def __init__(self, world: World, twins: Mapping[str, Twin], truth: Mapping[str, float]) -> None:
        self._world, self._twins, self._truth = world, dict(twins), dict(truth)

    def twin(self, address: str) -> Twin:
        """Return what stands at an address of the rig file."""
        return self._twins[address]

    def truth(self) -> Mapping[str, float]:
        """Return the hidden value of every quantity of the train; the source's power is that at instant 0."""
        return dict(self._truth)

    def block_by_hand(self, is_blocked: bool, now_s: float) -> None:
        """Block the beam at the source by hand, or clear it."""
        self._world.block_by_hand(is_blocked, now_s)


class _Assembly:
    """What stands on a bench while it is put together: mechanics, then the world, then meters in it."""

    def __init__(self, recipe: Recipe, rig: Rig, seed: int) -> None:
        self._rig, self._seed = rig, seed
        self._train = train_of(recipe)
        self._role_of = {name: role for role, name in rig.roles.items() if role in recipe.roles}
        self._axes = {entry.name: self._axis(entry) for entry in self._entries(MOUNT)}
        self._shutters = {entry.name: _shutter(entry) for entry in self._entries(SWITCH)}
        power = recipe.source.power
        power_u_w = None if power is None else power.u
        self.truth = draw_truth(self._train, seed, given=self._given(), power_u_w=power_u_w)
        self.world = self._make_world()

    def twins(self) -> dict[str, Twin]:
        """Return a twin for each address."""
        at_address: dict[str, list[InstrumentEntry]] = {}
        for entry in self._rig.instruments.values():
            at_address.setdefault(entry.at, []).append(entry)
        return {address: self._twin(entries) for address, entries in at_address.items()}

    def _entries(self, driver: str) -> list[InstrumentEntry]:
        return [entry for entry in self._rig.instruments.values() if entry.driver == driver]

    def _simulated(self, entry: InstrumentEntry, key: str) -> Any:
        """Return what the rig file's `simulated:` says of an instrument, or the default."""
        written = self._rig.simulated.instruments.get(entry.name, {}).get(key)
        return TWIN_OPTIONS[entry.driver][key].default if written is None else written

    def _given(self) -> dict[str, float]:
        bench = self._rig.simulated.bench
        given = {f"source.{key}": bench.get(key) for key in BENCH_OPTIONS}
        for entry in self._entries(METER):
            given[f"{self._role_of.get(entry.name)}.stray light"] = self._simulated(entry, "stray light")
        return {name: value for name, value in given.items() if value is not None}

    def _axis(self, entry: InstrumentEntry) -> Axis:
        """Make an axis that stands at its zero, or anywhere when a run homes it."""
        options, sense = entry.options, _sense(entry)
        low, high = sorted(sense * end for end in options["travel"])
        make = AxisMake((low, high), options["speed"], options["acceleration"], options["resolution"])
        left_at = 0.0
        if options["homing"] == HOMED_BY_RUN:
            left_at = float(generator(self._seed, f"{entry.name} left at").uniform(max(low, -180), min(high, 180)))
        return Axis(make, left_at_deg=left_at)

    def _make_world(self) -> World:
        mounts = {
            self._role_of[entry.name]: Mount(self._axes[entry.name].dial, _sense(entry))
            for entry in self._entries(MOUNT)
            if entry.name in self._role_of
        }
        shutters = [shutter.opening for name, shutter in self._shutters.items() if name in self._role_of]
        source = Source(self.truth["source.power"], self.truth["source.drift"])
        return World(source, reader(self._train, self.truth), mounts=mounts, shutters=shutters)

    def _twin(self, entries: list[InstrumentEntry]) -> Twin:
        first = entries[0]
        name, drivers = _plain(first.name), {entry.driver for entry in entries}
        if drivers == {MOUNT}:
            axes = {entry.options["channel"]: self._axes[entry.name] for entry in entries}
            return GcodeTwin(Machine(axes), name=name)
        if drivers == {SWITCH}:
            shutters = {entry.options["channel"]: self._shutters[entry.name] for entry in entries}
            switch = SimulatedSwitch(max(SWITCH_CHANNELS, *shutters), shutters)
            return ScpiTwin(switch, identity=f"polrig,simulated switch,{name},{__version__}")
        if drivers == {METER} and len(entries) == 1:
            identity = f"polrig,simulated power meter,{name},{__version__}"
            return ScpiTwin(self._meter(first), identity=identity)
        raise PlanError(
            f"the simulated bench has nothing that is {_several(entries)} at one address",
            where=f"{self._rig.path}: {first.at}",
            do="Give each of these instruments an address of its own, or rehearse with another rig file.",
        )

    def _meter(self, entry: InstrumentEntry) -> SimulatedPowerMeter:
        options = entry.options
        ranges_w = tuple(sorted(options["ranges"]))
        # as the driver has it: the noise belongs to the smallest range and grows with the full scale
        noise_w = [options["noise"] * full_scale_w / ranges_w[0] for full_scale_w in ranges_w]
        flat_noise_w = self._simulated(entry, "noise")
        relative_noise = self._simulated(entry, "relative noise")
        lag_s = self._simulated(entry, "time constant")
        make = MeterMake(
            ranges_w=ranges_w,
            time_constants_s=(options["time constant"] if lag_s is None else lag_s,) * len(ranges_w),
            noise_w=tuple(noise_w) if flat_noise_w is None else (flat_noise_w,) * len(ranges_w),
            relative_noise=options["relative noise"] if relative_noise is None else relative_noise,
            saturation_w=options["saturation"] or ranges_w[-1],
            apertures_s=APERTURES_S,
        )
        return SimulatedPowerMeter(make, self._head(entry), normals(self._seed, entry.name))

    def _head(self, entry: InstrumentEntry) -> Head:
        names = [detector.name for detector in self._train.detectors]
        role = self._role_of.get(entry.name)
        if role not in names:
            return HeadBesideBeam()
        stray_w = self.truth[f"{role}.stray light"]
        return HeadInBeam(self.world, names.index(role), stray_w=stray_w)


def _sense(entry: InstrumentEntry) -> float:
    return -1.0 if entry.options["positive"] == CLOCKWISE else 1.0


def _shutter(entry: InstrumentEntry) -> SimulatedShutter:
    opens_at_rest = entry.options["at rest"] == "open"
    return SimulatedShutter(Trajectory(float(opens_at_rest)), opens_at_rest, entry.options["moves in"])


def _several(entries: list[InstrumentEntry]) -> str:
    return " and ".join(sorted(entry.driver for entry in entries))


def _plain(name: str) -> str:
    """Write a name so that it fits into a field of an identity: ASCII, without separators of replies."""
    return "".join(
        letter if letter.isascii() and letter.isprintable() and letter not in ",;[]" else "_" for letter in name
    )


class SimulatedBenchFactory:
    """Builds benches; it has no state."""

    def twin_options(self, driver: str) -> Mapping[str, Option]:
        """Keys of the rig file's `simulated:` for an instrument of this driver."""
        return TWIN_OPTIONS.get(driver, {})

    def bench_options(self) -> Mapping[str, Option]:
        """Keys of the rig file's `simulated:` for the bench as a whole."""
        return BENCH_OPTIONS

    def default_rig(self, roles: Mapping[str, RoleKind]) -> str:
        """Return the text of a rig file with a well-behaved instrument for each role."""
        return default_rig(roles)

    def build(self, recipe: Recipe, rig: Rig, seed: int) -> SimulatedBench:
        """Build a bench; the same seed gives the same truth and the same noise."""
        assembly = _Assembly(recipe, rig, seed)
        return SimulatedBench(assembly.world, assembly.twins(), assembly.truth)


FACTORY: BenchFactory = SimulatedBenchFactory()
