"""A twin for every driver, and the options that the driver is opened with."""

from collections.abc import Callable
from dataclasses import dataclass

from scripted_twin import with_defaults

from rigctl.interfaces import Driver, Options
from rigctl.links.channel import Twin
from rigctl.thermistor import SteinhartHart, Thermistor
from rigctl_drivers import (
    current_source,
    gcode,
    power_meter,
    relay,
    slide,
    switch,
    temperature_controller,
)
from rigctl_sim.current_source import SimulatedCurrentSource, SourceMake
from rigctl_sim.diode import Load
from rigctl_sim.gcode_twin import GcodeTwin
from rigctl_sim.machine import Axis, AxisMake, Machine
from rigctl_sim.noise import normals
from rigctl_sim.plant import Plant, PlantMake
from rigctl_sim.power_meter import MeterMake, SimulatedPowerMeter
from rigctl_sim.scpi.rack import Rack
from rigctl_sim.scpi.status import Status
from rigctl_sim.scpi.twin import Device, ScpiTwin
from rigctl_sim.switch import Mover, SimulatedSwitch
from rigctl_sim.temperature_controller import ControllerMake, SimulatedTemperatureController
from rigctl_sim.trajectory import Trajectory

FAST_DEG_PER_S = 2000.0
"""So that a test in real time takes milliseconds."""
RANGES_W = (2e-6, 2e-5, 2e-4, 2e-3, 2e-2)
LIGHT_W = 1.0e-3
NEVER_S = float("inf")
TURN_ON_V, SERIES_OHM = 1.5, 5.0
SENSOR = SteinhartHart(1.12924e-3, 2.34108e-4, 8.7755e-8)
ROOM_C = 22.0
NOISE_K = 1e-3
SHUTTER, SLIDE, RELAY = 3, 4, 5
"""Channels of the relay card."""


class SteadyHead:
    """A head in light that never changes."""

    def mean_w(self, begin_s: float, end_s: float, *, time_constant_s: float) -> float:
        return LIGHT_W


def mount_twin(speed_deg_per_s: float = FAST_DEG_PER_S, left_at_deg: float = 0.0) -> Twin:
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


def relay_card(status: Status | None = None) -> SimulatedSwitch:
    movers = {
        SHUTTER: Mover(Trajectory(0.0), rests_at_one=False, moves_in_s=0.02),
        SLIDE: Mover(Trajectory(1.0), rests_at_one=True, moves_in_s=0.02),
    }
    return SimulatedSwitch(8, movers, status=status)


def switch_twin() -> Twin:
    return ScpiTwin(relay_card(), identity="polrig,simulated switch,relays,1.0")


def diode_source(status: Status | None = None, *, interlock_opens_at_s: float = NEVER_S) -> SimulatedCurrentSource:
    return SimulatedCurrentSource(
        SourceMake(current_a=0.2, compliance_v=5.0, resolution_a=10e-6),
        Load(TURN_ON_V, SERIES_OHM),
        Trajectory(0.0),
        status=status,
        interlock_opens_at_s=interlock_opens_at_s,
    )


def source_twin(*, interlock_opens_at_s: float = NEVER_S) -> Twin:
    source = diode_source(interlock_opens_at_s=interlock_opens_at_s)
    return ScpiTwin(source, identity="polrig,simulated current source,source 1,1.0")


def plant_controller(
    status: Status | None = None,
    *,
    channel: int = 1,
    sensor: Thermistor = SENSOR,
    sensor_breaks_at_s: float = NEVER_S,
) -> SimulatedTemperatureController:
    make = ControllerMake((5.0, 80.0), 1e-3, sensor, NOISE_K, sensor_breaks_at_s)
    plant = Plant(PlantMake(ROOM_C, 0.01, 1000.0, 0.01), fails_at_s=sensor_breaks_at_s)
    return SimulatedTemperatureController(make, plant, normals(1, "tec 1"), channel=channel, status=status)


def controller_twin(*, sensor: Thermistor = SENSOR, sensor_breaks_at_s: float = NEVER_S) -> Twin:
    controller = plant_controller(sensor=sensor, sensor_breaks_at_s=sensor_breaks_at_s)
    return ScpiTwin(controller, identity="polrig,simulated temperature controller,tec 1,1.0")


def rack_twin(*, interlock_opens_at_s: float = NEVER_S) -> Twin:
    """A source on channel 1, a controller on channel 2 and a relay card, behind one address."""
    status = Status()
    devices: list[Device] = [
        diode_source(status, interlock_opens_at_s=interlock_opens_at_s),
        plant_controller(status, channel=2),
        relay_card(status),
    ]
    return ScpiTwin(Rack(devices, status), identity="polrig,simulated rack,rack 1,1.0")


@dataclass(frozen=True, slots=True)
class Entry:
    """A driver, a new twin of its kind, and options that suit both."""

    driver: Driver
    make_twin: Callable[[], Twin]
    options: Options


def entry(driver: Driver, make_twin: Callable[[], Twin], **given: object) -> Entry:
    return Entry(driver, make_twin, with_defaults(dict(driver.options), **given))


DRIVERS: dict[str, Entry] = {
    made.driver.name: made
    for made in (
        entry(gcode.DRIVER, mount_twin, speed=FAST_DEG_PER_S, acceleration=10.0 * FAST_DEG_PER_S),
        entry(power_meter.DRIVER, meter_twin),
        entry(switch.DRIVER, switch_twin, channel=SHUTTER),
        entry(slide.DRIVER, switch_twin, channel=SLIDE, moves_in=0.02),
        entry(relay.DRIVER, switch_twin, channel=RELAY),
        entry(current_source.DRIVER, source_twin),
        entry(temperature_controller.DRIVER, controller_twin, thermistor=SENSOR),
    )
}
