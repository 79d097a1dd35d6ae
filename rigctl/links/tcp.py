"""Bytes to and from an instrument on the network.

It owns one connection and the ownership of its address; waiting and deadlines are the stream's.
"""

from rigctl.errors import PlanError
from rigctl.links.addresses import TcpAddress, parse_address
from rigctl.links.owner import Ownership
from rigctl.links.stream import SocketStream, find_places
from rigctl.timeline import Timeline


class TcpChannel:
    """A connection to `tcp://host:port`, made by the construction within `connect_s`.

    Raises `PlanError` for another kind of address, `BusyError` while another run holds this one,
    `DisconnectedError` when nobody listens there, `LinkTimeoutError` when the host does not answer.
    """

    def __init__(self, address: str, timeline: Timeline, *, connect_s: float = 5.0) -> None:
        parsed = parse_address(address)
        if not isinstance(parsed, TcpAddress):
            raise PlanError(f"'{address}' is not reached by a socket", do="write tcp://host:port")
        self.address = address
        places = find_places(parsed.host, parsed.port, address)
        self._owner = Ownership(address, place=str(TcpAddress(str(places[0][4][0]), parsed.port)))
        try:
            self._stream = SocketStream(address, places, timeline, timeline.now() + connect_s)
        except BaseException:
            self._owner.close()
            raise

    def write(self, data: bytes, deadline_s: float) -> None:
        """Send all bytes."""
        self._stream.write(data, deadline_s)

    def readline(self, deadline_s: float) -> bytes:
        """Return bytes up to and including the next LF."""
        return self._stream.readline(deadline_s)

    def read_exact(self, count: int, deadline_s: float) -> bytes:
        """Return exactly `count` bytes."""
        return self._stream.read_exact(count, deadline_s)

    def discard(self) -> bytes:
        """Take away what has arrived unread, without waiting, and return it."""
        return self._stream.discard()

    def close(self) -> None:
        """Give the address back; a second call does nothing."""
        self._stream.close()
        self._owner.close()
