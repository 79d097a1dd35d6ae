"""The way to any address that people write, and a twin at the far end of each."""

import contextlib
import threading
from collections.abc import Callable, Iterator

import pytest
from link_peers import ActingTwin, NonceFamily

from rigctl.errors import PlanError
from rigctl.links.channel import Channel
from rigctl.links.family import Opening
from rigctl.links.hislip import HislipChannel
from rigctl.links.link import Link
from rigctl.links.opening import open_channel
from rigctl.links.serial import SerialChannel
from rigctl.links.serve import TwinServer
from rigctl.links.tcp import TcpChannel
from rigctl.links.visa import VisaChannel
from rigctl.timeline import Timeline, WallTimeline

RIG = {
    "tcp://10.0.0.7:5025": TcpChannel,
    "serial:///dev/ttyUSB0?baud=115200": SerialChannel,
    "visa://TCPIP0::10.0.0.9::hislip0::INSTR": HislipChannel,
    "visa://GPIB0::7::INSTR": HislipChannel,  # a twin of an instrument on any bus of VISA
}


@pytest.fixture
def server() -> Iterator[TwinServer]:
    timeline = WallTimeline()
    with TwinServer({address: ActingTwin() for address in RIG}, timeline) as opened:
        thread = threading.Thread(target=opened.serve)
        thread.start()
        yield opened
        timeline.stop.request("done")
        thread.join(10.0)
    timeline.stop.close()


@pytest.mark.parametrize("at", RIG)
def test_each_address_is_reached_by_its_own_kind_of_channel(server: TwinServer, wall: WallTimeline, at: str) -> None:
    with contextlib.closing(open_channel(server.addresses[at], wall, Opening())) as channel:
        assert type(channel) is RIG[at]
        assert channel.address == server.addresses[at]


def test_one_server_answers_at_all_of_its_addresses_at_once(server: TwinServer, wall: WallTimeline) -> None:
    with contextlib.ExitStack() as stack:
        links = [
            stack.enter_context(contextlib.closing(Link(address, opener(address, wall), NonceFamily(), wall)))
            for address in server.addresses.values()
        ]
        answers = [link.exchange(b"ECHO? %d\n" % number) for number, link in enumerate(links)]

    assert answers == [(b"%d" % number,) for number in range(len(links))]


def opener(address: str, timeline: Timeline) -> Callable[[], Channel]:
    return lambda: open_channel(address, timeline, Opening())


def test_a_serial_line_is_opened_as_the_family_says(server: TwinServer, wall: WallTimeline) -> None:
    began_s = wall.now()
    address = server.addresses["serial:///dev/ttyUSB0?baud=115200"]

    open_channel(address, wall, Opening(asserts_dtr=False, quiet_s=0.1)).close()

    assert wall.now() - began_s >= 0.1


def test_other_resources_go_to_visa(wall: WallTimeline, monkeypatch: pytest.MonkeyPatch) -> None:
    asked: list[str] = []
    monkeypatch.setattr("rigctl.links.visa._opened", lambda resource: asked.append(resource))

    channel = open_channel("visa://GPIB0::7::INSTR", wall, Opening())

    assert isinstance(channel, VisaChannel)
    assert asked == ["GPIB0::7::INSTR"]
    channel.close()


@pytest.mark.parametrize("address", ["", "10.0.0.7:5025", "usb://1", "visa://ASRL1::INSTR"])
def test_what_is_no_address_is_a_mistake_of_the_plan(wall: WallTimeline, address: str) -> None:
    with pytest.raises(PlanError):
        open_channel(address, wall, Opening())
