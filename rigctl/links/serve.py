"""Twins on real ports, in real time: the same bytes for whoever opens them.

It owns one loop without threads, and the choice of the port: an address of a rig file gets one of its own scheme,
on this computer only; whatever VISA reaches is served as HiSLIP. It knows no command.
"""

import selectors
from collections.abc import Mapping
from types import TracebackType
from typing import Protocol

from rigctl.links.addresses import HislipAddress, SerialAddress, TcpAddress, VisaAddress, parse_address
from rigctl.links.channel import Twin
from rigctl.links.serve_hislip import HislipPort
from rigctl.links.serve_pty import PtyPort
from rigctl.links.serve_tcp import TcpPort
from rigctl.timeline import Timeline


class Port(Protocol):
    """A twin where somebody can open it, at `address`."""

    address: str

    def ready_in_s(self) -> float | None:
        """How long until `pump` has something to do; None: until an event."""

    def pump(self) -> None:
        """Hand on what is ready."""

    def close(self) -> None:
        """Close whoever is there, and the port."""


class TwinServer:
    """Twins by address, each on a port of its own; the ports are open from construction on.

    `addresses` are where they are reached, by the address that stands in the rig file. A port serves one client
    at a time.
    """

    def __init__(self, twins: Mapping[str, Twin], timeline: Timeline) -> None:
        self._timeline = timeline
        self._selector = selectors.DefaultSelector()
        self._selector.register(timeline.stop.wake_fd, selectors.EVENT_READ)
        self._ports: dict[str, Port] = {}
        try:
            for address, twin in twins.items():
                self._ports[address] = _opened(address, twin, timeline, self._selector)
        except BaseException:
            self.close()
            raise
        self.addresses: Mapping[str, str] = {address: port.address for address, port in self._ports.items()}

    def serve(self) -> None:
        """Answer until a stop is asked for."""
        while not self._timeline.stop.reasons:
            for key, events in self._selector.select(self._pause_s()):
                if key.data is not None:
                    key.data(events)
            for port in self._ports.values():
                port.pump()

    def close(self) -> None:
        """Close every client and port."""
        for port in self._ports.values():
            port.close()
        self._selector.close()

    def __enter__(self) -> "TwinServer":
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.close()

    def _pause_s(self) -> float | None:
        waits_s = [wait_s for port in self._ports.values() if (wait_s := port.ready_in_s()) is not None]
        return min(waits_s, default=None)


def _opened(address: str, twin: Twin, timeline: Timeline, selector: selectors.BaseSelector) -> Port:
    match parse_address(address):
        case TcpAddress():
            return TcpPort(twin, timeline, selector)
        case SerialAddress() as line:
            return PtyPort(twin, timeline, selector, line=line)
        case HislipAddress() as place:
            return HislipPort(twin, timeline, selector, device=place.device)
        case VisaAddress():
            return HislipPort(twin, timeline, selector, device="hislip0")
