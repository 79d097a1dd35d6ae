"""The project's own twins, reached as drivers reach instruments: in virtual time, or over TCP."""

import threading
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from datetime import UTC, datetime
from typing import Literal, TypeVar

from rigctl.interfaces import Begun, Driver, Instrument, Options
from rigctl.links.channel import Twin
from rigctl.links.link import Link
from rigctl.links.loopback import LoopbackChannel
from rigctl.links.serve import TwinServer
from rigctl.links.tcp import TcpChannel
from rigctl.runner.polling import complete
from rigctl.timeline import Timeline, VirtualTimeline, WallTimeline
from rigctl_sim.gcode_twin import GcodeTwin
from rigctl_sim.machine import Axis, AxisMake, Machine
from rigctl_sim.noise import normals
from rigctl_sim.power_meter import MeterMake, SimulatedPowerMeter
from rigctl_sim.scpi.twin import ScpiTwin
from rigctl_sim.switch import Mover, SimulatedSwitch
from rigctl_sim.trajectory import Trajectory

T = TypeVar("T")

Transport = Literal["loopback", "TCP"]

RANGES_W = (2e-6, 2e-5, 2e-4, 2e-3, 2e-2)
LIGHT_W = 1.0e-3


class SteadyHead:
    """A head in light that never changes."""

    def mean_w(self, begin_s: float, end_s: float, *, time_constant_s: float) -> float:
        return LIGHT_W


def mount_twin(speed_deg_per_s: float, left_at_deg: float = 0.0) -> Twin:
    make = AxisMake((-3600.0, 3600.0), speed_deg_per_s, 10.0 * speed_deg_per_s, 0.001)
    axes = {"A": Axis(make, left_at_deg=left_at_deg), "B": Axis(make)}
    return GcodeTwin(Machine(axes), name="mount 1")


def meter_twin() -> Twin:
    make = MeterMake(
        ranges_w=RANGES_W,
        time_constants_s=(0.01,) * len(RANGES_W),
        noise_w=tuple(1e-5 * full_scale_w for full_scale_w in RANGES_W),
        relative_noise=1e-5,
        saturation_w=RANGES_W[-1],
        apertures_s=(1e-3, 10.0),
    )
    meter = SimulatedPowerMeter(make, SteadyHead(), normals(1, "head 7"))
    return ScpiTwin(meter, identity="polrig,simulated power meter,head 7,1.0")


def switch_twin() -> Twin:
    shutters = {3: Mover(Trajectory(0.0), rests_at_one=False, moves_in_s=0.02)}
    return ScpiTwin(SimulatedSwitch(8, shutters), identity="polrig,simulated switch,relays,1.0")


@dataclass(frozen=True, slots=True)
class Place:
    """A twin behind a channel, and the time both live in."""

    link: Link
    timeline: Timeline

    def open(self, driver: Driver, options: Options) -> Instrument:
        return driver.open(self.link, options)

    def wait_for(self, begun: Begun[T]) -> T:
        return complete(self.timeline, {"it": begun})["it"]


@contextmanager
def place(transport: Transport, driver: Driver, twin: Twin) -> Iterator[Place]:
    """Stand a twin somewhere and open a link of the driver's family to it."""
    if transport == "loopback":
        virtual = VirtualTimeline(datetime(2026, 1, 2, tzinfo=UTC))
        address = "tcp://bench:5025"
        yield Place(Link(address, lambda: LoopbackChannel(address, twin, virtual), driver.family, virtual), virtual)
        virtual.stop.close()
        return
    with served(twin) as address:
        wall = WallTimeline()
        link = Link(address, lambda: TcpChannel(address, wall), driver.family, wall)
        try:
            yield Place(link, wall)
        finally:
            link.close()
            wall.stop.close()


@contextmanager
def served(twin: Twin) -> Iterator[str]:
    """Serve a twin on a port of this computer, in a thread that ends with the context; yields its address."""
    timeline = WallTimeline()
    with TwinServer({"it": twin}, timeline) as server:
        thread = threading.Thread(target=server.serve)
        thread.start()
        try:
            yield server.addresses["it"]
        finally:
            timeline.stop.request("the test has ended")
            thread.join()
    timeline.stop.close()
