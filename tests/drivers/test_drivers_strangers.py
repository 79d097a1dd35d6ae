"""The SCPI drivers against an independent implementation of the grammar, status and error queue, over TCP.

That parser is stricter than many instruments: a message of which any part fails is answered with nothing at
all, and an empty line is a syntax error.
"""

import asyncio
import socket
import threading
import time
from collections.abc import AsyncIterator, Callable, Iterator
from contextlib import asynccontextmanager, contextmanager
from dataclasses import dataclass, field
from typing import Any

import pytest
from scripted_twin import with_defaults

from rigctl.errors import LinkTimeoutError, RefusedError, WrongInstrumentError
from rigctl.interfaces import Flag, Identity
from rigctl.links.family import Family
from rigctl.links.link import Link
from rigctl.links.tcp import TcpChannel
from rigctl.runner.polling import complete
from rigctl.thermistor import SteinhartHart
from rigctl.timeline import WallTimeline
from rigctl_drivers import current_source, power_meter, relay, slide, switch, temperature_controller
from rigctl_drivers.current_source import ScpiCurrentSource
from rigctl_drivers.power_meter import ScpiPowerMeter
from rigctl_drivers.relay import ScpiRelay
from rigctl_drivers.scpi_family import SCPI, ScpiFamily
from rigctl_drivers.slide import ScpiSlide
from rigctl_drivers.switch import ScpiSwitch
from rigctl_drivers.temperature_controller import ScpiTemperatureController

scpipy = pytest.importorskip("scpipy.server")

SENSOR = SteinhartHart(1.12924e-3, 2.34108e-4, 8.7755e-8)

WORDS = {
    "INITiate:CONTinuous": "0",
    "TRIGger:SOURce": "IMM",
    "TRIGger:COUNt": "1",
    "SENSe:AVERage:STATe": "1",
    "FORMat:DATA": "ASC",
    "UNIT:POWer": "W",
    "SENSe:POWer:APERture": "0.1",
    "SENSe:POWer:RANGe:UPPer": "0.02",
    "SENSe:POWer:RANGe:AUTO": "1",
    "SENSe:CORRection:WAVelength": "633",
}
"""Settings that this instrument keeps as they were written, and what they are at power-on."""


@dataclass
class Stranger:
    """A server of the other implementation with the commands of a head and of a relay."""

    router: Any
    kept: dict[str, str] = field(default_factory=lambda: dict(WORDS))
    has_block: bool = False
    closed: set[str] = field(default_factory=set)

    def add(self, pattern: str, act: Callable[..., Any]) -> None:
        self.router.add_route(pattern, act)

    def keep(self, name: str) -> None:
        self.add(f"{name} <value>", lambda context, value: self.write(name, value))
        self.add(f"{name}?", lambda context: self.kept[name])

    def write(self, name: str, value: str) -> None:
        words = {"ON": "1", "OFF": "0", "ASCII": "ASC", "IMMEDIATE": "IMM"}
        self.kept[name] = words.get(value, value.removesuffix(" NM"))

    def begin(self, context: Any) -> None:
        self.has_block = True

    def abort(self, context: Any) -> None:
        self.has_block = False

    def fetch(self, context: Any) -> str:
        count = int(self.kept["TRIGger:COUNt"]) if self.has_block else 0
        return ",".join(["9.9E37", *["1.25E-03"] * (count - 1)])


def as_head(stranger: Stranger) -> None:
    stranger.add("*IDN?", lambda context: "ACME,PM-1,42,0.9")
    for name in WORDS:
        stranger.keep(name)
    stranger.add("ABORt", stranger.abort)
    stranger.add("INITiate:IMMediate", stranger.begin)
    stranger.add("FETCh?", stranger.fetch)
    stranger.add("SLOW?", lambda context: asyncio.sleep(0.4, "67E-03"))


def as_relays(stranger: Stranger) -> None:
    stranger.add("*IDN?", lambda context: "ACME,RELAYS,0,0")
    stranger.add("ROUTe:CLOSe <value>", lambda context, value: stranger.closed.add(value))
    stranger.add("ROUTe:OPEN <value>", lambda context, value: stranger.closed.discard(value))
    stranger.add("ROUTe:CLOSe? <value>", lambda context, value: int(value in stranger.closed))


def as_driver_of_diodes(stranger: Stranger) -> None:
    """A source on channel 1 and a controller on channel 2 of one instrument."""
    kept = {
        "SOURce1:CURRent:LEVel:IMMediate:AMPLitude": "0",
        "SOURce1:CURRent:LIMit:AMPLitude": "0.2",
        "SOURce1:VOLTage:PROTection:LEVel": "5",
        "SOURce2:TEMPerature:SPOint": "25",
        "SOURce2:TEMPerature:LIMit:LOW": "0",
        "SOURce2:TEMPerature:LIMit:HIGH": "20",
        "OUTPut1:STATe": "0",
        "OUTPut2:STATe": "0",
    }
    stranger.kept |= kept
    for name in kept:
        stranger.keep(name)
    constants = "SENSe2:TEMPerature:THERmistor:SHHart"
    stranger.add(f"{constants} <a>, <b>, <c>", lambda context, a, b, c: stranger.write(constants, f"{a},{b},{c}"))
    stranger.add(f"{constants}?", lambda context: stranger.kept[constants])
    stranger.add("*IDN?", lambda context: "ACME,DRIVER,7,2.1")
    stranger.add("MEASure1:CURRent?", lambda context: stranger.kept["SOURce1:CURRent:LEVel:IMMediate:AMPLitude"])
    stranger.add("MEASure1:VOLTage?", lambda context: "1.67")
    stranger.add("OUTPut1:PROTection:TRIPped?", lambda context: "0")
    stranger.add("MEASure2:TEMPerature?", lambda context: "24.999")
    stranger.add("MEASure2:RESistance?", lambda context: "10000.4")


def wait_for_listener(port: int) -> None:
    """Connect once; the server tells that it starts, but not that it listens."""
    deadline_s = time.monotonic() + 10.0
    while time.monotonic() < deadline_s:
        with socket.socket() as probe:
            if probe.connect_ex(("127.0.0.1", port)) == 0:
                return
    pytest.fail("the other server does not listen")


@contextmanager
def served(make: Callable[[Stranger], None]) -> Iterator[str]:
    """Run the other server in a thread of its own; yields its address."""
    up, loops = threading.Event(), []

    @asynccontextmanager
    async def lifespan(_server: Any) -> AsyncIterator[dict[str, Any]]:
        loops.append(asyncio.get_running_loop())
        up.set()
        yield {}

    with socket.socket() as probe:
        probe.bind(("127.0.0.1", 0))
        port = probe.getsockname()[1]
    server = scpipy.Server("127.0.0.1", port, lifespan=lifespan)
    stranger = Stranger(scpipy.Router())
    make(stranger)
    server.include_router(stranger.router)
    thread = threading.Thread(target=server.run)
    thread.start()
    assert up.wait(10.0)
    wait_for_listener(port)
    try:
        yield f"tcp://127.0.0.1:{port}"
    finally:
        loops[0].call_soon_threadsafe(server.stop)
        thread.join(10.0)


@contextmanager
def linked(family: Family, make: Callable[[Stranger], None]) -> Iterator[Link]:
    with served(make) as address:
        timeline = WallTimeline()
        link = Link(address, lambda: TcpChannel(address, timeline), family, timeline)
        try:
            yield link
        finally:
            link.close()
            timeline.stop.close()


@pytest.fixture
def head() -> Iterator[tuple[Link, ScpiPowerMeter]]:
    with linked(SCPI, as_head) as link:
        yield link, ScpiPowerMeter(link, with_defaults(dict(power_meter.DRIVER.options)))


@pytest.fixture
def shutter() -> Iterator[ScpiSwitch]:
    with linked(SCPI, as_relays) as link:
        yield ScpiSwitch(link, with_defaults(dict(switch.DRIVER.options), channel=3))


@pytest.fixture
def diode_driver() -> Iterator[tuple[Link, ScpiCurrentSource, ScpiTemperatureController]]:
    with linked(SCPI, as_driver_of_diodes) as link:
        source = ScpiCurrentSource(link, with_defaults(dict(current_source.DRIVER.options)))
        options = with_defaults(dict(temperature_controller.DRIVER.options), channel=2, thermistor=SENSOR)
        yield link, source, ScpiTemperatureController(link, options)


def test_a_foreign_head_is_identified_set_and_read(head: tuple[Link, ScpiPowerMeter]) -> None:
    link, meter = head

    assert meter.identify() == Identity("ACME", "PM-1", "42", "0.9")
    meter.set_wavelength(785.2e-9)
    assert meter.set_range(1e-3) == 2e-3
    meter.set_dwell(3, 0.01)
    dwell = complete(link.timeline, {"head": meter.begin_dwell()})["head"]
    assert dwell.levels_w[1:] == (1.25e-3, 1.25e-3)
    assert (dwell.flags, dwell.range_w) == (Flag.OVERLOAD, 2e-3)
    assert meter.settings()["wavelength_m"] == pytest.approx(785.2e-9)


def test_a_foreign_relay_drives_the_shutter(shutter: ScpiSwitch) -> None:
    assert shutter.identify().model == "RELAYS"
    assert not shutter.is_open()
    assert shutter.begin_set(True).poll() is True
    assert shutter.begin_set(False).poll() is False


def test_a_foreign_relay_drives_a_slide_and_a_contact() -> None:
    with linked(SCPI, as_relays) as link:
        carrier = ScpiSlide(link, with_defaults(dict(slide.DRIVER.options), channel=4))
        contact = ScpiRelay(link, with_defaults(dict(relay.DRIVER.options), channel=5))

        assert carrier.identify().model == contact.identify().model == "RELAYS"
        assert carrier.is_in()
        assert carrier.begin_set(False).poll() is False
        assert contact.begin_set(True).poll() is True
        assert not carrier.is_in()


def test_a_foreign_source_is_driven_and_switched_off(
    diode_driver: tuple[Link, ScpiCurrentSource, ScpiTemperatureController],
) -> None:
    _, source, _ = diode_driver

    assert source.identify() == Identity("ACME", "DRIVER", "7", "2.1")
    assert (source.set_limit(0.045), source.set_compliance(2.5)) == (0.045, 2.5)
    assert source.set_current(0.034) == 0.034
    assert source.set_output(True) is True
    seen = source.conditions()
    assert (seen.current_a, seen.voltage_v, seen.is_on, seen.is_tripped) == (0.034, 1.67, True, False)
    assert source.set_output(False) is False
    assert source.settings()["output"] == "off"


def test_off_gets_through_to_a_foreign_source_whatever_was_sent_before(
    diode_driver: tuple[Link, ScpiCurrentSource, ScpiTemperatureController],
) -> None:
    link, source, _ = diode_driver
    source.set_output(True)
    link.write(b"NO:SUCH:HEADER\n*ESR?\nSOURCE1:CURR")
    link.mark_out_of_step()

    assert source.set_output(False) is False
    assert not source.conditions().is_on


def test_a_foreign_controller_is_told_its_sensor_and_regulates(
    diode_driver: tuple[Link, ScpiCurrentSource, ScpiTemperatureController],
) -> None:
    _, _, tec = diode_driver

    assert tec.identify().model == "DRIVER"
    tec.set_span(10.0, 40.0)
    assert tec.set_temperature(25.0) == 25.0
    assert tec.set_output(True) is True
    seen = tec.conditions()
    assert (seen.is_on, seen.is_at_limit, seen.resistance_ohm) == (True, False, 10000.4)
    assert seen.temperature_c == pytest.approx(24.999, abs=1e-3)
    assert tec.settings() == {
        "setpoint_c": 25.0,
        "lowest_c": 10.0,
        "highest_c": 40.0,
        "output": "on",
        "thermistor": str(SENSOR),
    }
    assert tec.set_output(False) is False


def test_a_question_that_a_foreign_parser_does_not_know_is_told_with_its_own_words(
    head: tuple[Link, ScpiPowerMeter],
) -> None:
    link, _ = head

    with pytest.raises(RefusedError) as caught:
        link.exchange(b"NO:SUCH:HEADER?\n", timeout_s=0.2)

    assert (caught.value.code, caught.value.text) == (-110, "Command header error")


def test_a_foreign_relay_in_the_head_s_place_is_the_wrong_instrument() -> None:
    with linked(ScpiFamily(reply_timeout_s=0.2), as_relays) as link:
        meter = ScpiPowerMeter(link, with_defaults(dict(power_meter.DRIVER.options)))
        with pytest.raises(WrongInstrumentError, match="RELAYS"):
            meter.identify()


def test_a_late_foreign_reply_is_never_the_answer_to_the_next_question(
    head: tuple[Link, ScpiPowerMeter],
) -> None:
    link, meter = head
    with pytest.raises(LinkTimeoutError):
        link.exchange(b"SLOW?\n", timeout_s=0.1)

    assert meter.identify().model == "PM-1"
    assert b"67E-03" in link.take_discarded()


def test_unread_foreign_replies_and_a_half_sent_command_are_resynced_away(
    head: tuple[Link, ScpiPowerMeter],
) -> None:
    link, meter = head
    link.write(b"*ESR?\n*SRE?\nUNIT:POW")
    link.mark_out_of_step()

    assert meter.identify().model == "PM-1"
