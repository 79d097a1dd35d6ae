"""A twin on a loopback port: its bytes, and nothing else, for one client at a time."""

import selectors
import socket

from rigctl.errors import DisconnectedError
from rigctl.links.addresses import TcpAddress
from rigctl.links.channel import Twin
from rigctl.links.served import HOST, Client
from rigctl.timeline import Timeline


class TcpPort:
    """One twin, its listening socket, and the one client it may have; another that connects is closed at once."""

    def __init__(self, twin: Twin, timeline: Timeline, selector: selectors.BaseSelector) -> None:
        self._twin, self._timeline, self._selector = twin, timeline, selector
        self._listener = socket.create_server((HOST, 0))
        self._listener.setblocking(False)
        self._client: Client | None = None
        selector.register(self._listener, selectors.EVENT_READ, self._accept)
        self.address = str(TcpAddress(HOST, self._listener.getsockname()[1]))

    def ready_in_s(self) -> float | None:
        """How long until the twin has bytes to fetch; None: it has none, or the client must read first."""
        ready_s = self._twin.next_ready_s()
        if ready_s is None or (self._client is not None and self._client.is_full):
            return None
        return max(ready_s - self._timeline.now(), 0.0)

    def pump(self) -> None:
        """Fetch what the twin has ready and hand it on; without a client it is lost, as on a real line."""
        if self.ready_in_s() == 0.0:
            try:
                data = self._twin.take(self._timeline.now())
            except DisconnectedError:
                self._hang_up()
                return
            if self._client is not None:
                self._client.send(data)
        elif self._client is not None:
            self._client.flush()

    def close(self) -> None:
        """Close the client and the port."""
        self._hang_up()
        self._selector.unregister(self._listener)
        self._listener.close()

    def _accept(self, _events: int) -> None:
        try:
            sock, _ = self._listener.accept()
        except OSError:  # it left before it was let in
            return
        if self._client is not None:
            self._client.let_leave()
        if self._client is not None:
            sock.close()
            return
        self._client = Client(sock, self._selector, heard=self._hear, left=self._forget)

    def _hear(self, data: bytes) -> None:
        self._twin.receive(data, self._timeline.now())

    def _forget(self) -> None:
        self._client = None

    def _hang_up(self) -> None:
        if self._client is not None:
            self._client.close()
