"""Twins on real ports, in real time: the same bytes for whoever connects.

It owns the listening sockets, on this computer's own address only, and one loop without threads. It knows no
command; what is bounded here are the bytes kept for a client that does not read.
"""

import selectors
import socket
from collections.abc import Mapping
from types import TracebackType

from rigctl.errors import DisconnectedError
from rigctl.links.channel import Twin
from rigctl.timeline import Timeline

_HOST = "127.0.0.1"
_CHUNK_BYTES = 2**16
_MOST_PENDING_BYTES = 2**20
_FAREWELL_CHUNKS = 16


class _Port:
    """One twin, its listening socket, and the one client it may have."""

    def __init__(self, twin: Twin, timeline: Timeline, selector: selectors.BaseSelector) -> None:
        self._twin, self._timeline, self._selector = twin, timeline, selector
        self._listener = socket.create_server((_HOST, 0))
        self._listener.setblocking(False)
        self._client: socket.socket | None = None
        self._pending = bytearray()
        selector.register(self._listener, selectors.EVENT_READ, self._accept)
        self.port: int = self._listener.getsockname()[1]

    def ready_in_s(self) -> float | None:
        """How long until the twin has bytes to fetch; None: it has none, or the client must read first."""
        ready_s = self._twin.next_ready_s()
        if ready_s is None or len(self._pending) > _MOST_PENDING_BYTES:
            return None
        return max(ready_s - self._timeline.now(), 0.0)

    def pump(self) -> None:
        """Fetch what the twin has ready and hand it on; without a client it is lost, as on a real line."""
        if self.ready_in_s() == 0.0:
            try:
                self._pending += self._twin.take(self._timeline.now())
            except DisconnectedError:
                self._hang_up()
        if self._pending:
            self._send()

    def close(self) -> None:
        """Close the client and the port."""
        self._hang_up()
        self._selector.unregister(self._listener)
        self._listener.close()

    def _accept(self, _events: int) -> None:
        try:
            client, _ = self._listener.accept()
        except OSError:  # it left before it was let in
            return
        self._let_leave()
        if self._client is not None:
            client.close()
            return
        client.setblocking(False)
        client.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
        self._client = client
        self._selector.register(client, selectors.EVENT_READ, self._serve)

    def _let_leave(self) -> None:
        """See whether the client has gone: somebody who closes and comes back at once is no second client."""
        for _ in range(_FAREWELL_CHUNKS):
            if not self._take_chunk():
                return

    def _serve(self, events: int) -> None:
        if events & selectors.EVENT_READ:
            self._take_chunk()

    def _take_chunk(self) -> bool:
        """Hand one chunk of the client's bytes to the twin; False when there is none, or no client."""
        if self._client is None:
            return False
        try:
            data = self._client.recv(_CHUNK_BYTES)
            if data:
                self._twin.receive(data, self._timeline.now())
        except BlockingIOError:
            return False
        except (OSError, DisconnectedError):
            data = b""
        if not data:
            self._hang_up()
        return bool(data)

    def _send(self) -> None:
        if self._client is None:
            self._pending.clear()
            return
        try:
            del self._pending[: self._client.send(self._pending)]
        except BlockingIOError:
            pass
        except OSError:
            self._hang_up()
            return
        self._selector.modify(self._client, self._interest(), self._serve)

    def _interest(self) -> int:
        if not self._pending:
            return selectors.EVENT_READ
        is_full = len(self._pending) > _MOST_PENDING_BYTES
        return selectors.EVENT_WRITE | (0 if is_full else selectors.EVENT_READ)

    def _hang_up(self) -> None:
        client, self._client = self._client, None
        self._pending.clear()
        if client is not None:
            self._selector.unregister(client)
            client.close()


class TwinServer:
    """Twins by address, each on a loopback port of its own; the ports are open from construction on.

    A port serves one client at a time; another one that connects is closed at once.
    """

    def __init__(self, twins: Mapping[str, Twin], timeline: Timeline) -> None:
        self._timeline = timeline
        self._selector = selectors.DefaultSelector()
        self._selector.register(timeline.stop.wake_fd, selectors.EVENT_READ)
        self._ports = {address: _Port(twin, timeline, self._selector) for address, twin in twins.items()}
        self.addresses: Mapping[str, str] = {
            address: f"tcp://{_HOST}:{port.port}" for address, port in self._ports.items()
        }

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
