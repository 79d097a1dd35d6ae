"""The project's own twins, reached as drivers reach instruments: in virtual time, or at real ports in real time."""

import threading
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from datetime import UTC, datetime
from typing import Literal, TypeVar

from rigctl.interfaces import Begun, Driver, Instrument, Options
from rigctl.links.channel import Twin
from rigctl.links.family import Opening
from rigctl.links.link import Link
from rigctl.links.loopback import LoopbackChannel
from rigctl.links.opening import open_channel
from rigctl.links.serve import TwinServer
from rigctl.runner.polling import complete
from rigctl.timeline import Timeline, VirtualTimeline, WallTimeline

T = TypeVar("T")

Transport = Literal["loopback", "TCP", "pseudo-terminal", "HiSLIP"]

ADDRESSES: dict[Transport, str] = {
    "TCP": "tcp://10.0.0.7:5025",
    "pseudo-terminal": "serial:///dev/ttyUSB0?baud=115200",
    "HiSLIP": "visa://TCPIP0::10.0.0.9::hislip0::INSTR",
}
"""Where instruments stand that are served at a port of that kind."""


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
    with served(twin, ADDRESSES[transport]) as address:
        wall = WallTimeline()
        # a twin does not boot when its line is opened
        link = Link(address, lambda: open_channel(address, wall, Opening()), driver.family, wall)
        try:
            yield Place(link, wall)
        finally:
            link.close()
            wall.stop.close()


@contextmanager
def served(twin: Twin, at: str) -> Iterator[str]:
    """Serve a twin on a port of this computer, in a thread that ends with the context; yields its address."""
    timeline = WallTimeline()
    with TwinServer({at: twin}, timeline) as server:
        thread = threading.Thread(target=server.serve)
        thread.start()
        try:
            yield server.addresses[at]
        finally:
            timeline.stop.request("the test has ended")
            thread.join()
    timeline.stop.close()
