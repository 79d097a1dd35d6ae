"""A client of a served twin: its socket, and bytes both ways without ever waiting.

It owns the socket, and bounds the bytes kept for a client that does not read.
"""

import selectors
import socket
from collections.abc import Callable

from rigctl.errors import DisconnectedError

HOST = "127.0.0.1"
_CHUNK_BYTES = 2**16
_MOST_PENDING_BYTES = 2**20
_FAREWELL_CHUNKS = 16


class Client:
    """One accepted connection, registered with a selector whose data are callbacks for events.

    `heard` gets what the client says and may raise `DisconnectedError` to end it; `left` is called once when the
    connection has ended, whoever ended it.
    """

    def __init__(
        self,
        sock: socket.socket,
        selector: selectors.BaseSelector,
        *,
        heard: Callable[[bytes], None],
        left: Callable[[], None],
    ) -> None:
        self._socket, self._selector, self._heard, self._left = sock, selector, heard, left
        self._pending = bytearray()
        self.is_open = True
        sock.setblocking(False)
        sock.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
        selector.register(sock, selectors.EVENT_READ, self._serve)

    @property
    def is_full(self) -> bool:
        """Whether the client must read before it is given, or heard, any more."""
        return len(self._pending) > _MOST_PENDING_BYTES

    def send(self, data: bytes) -> None:
        """Hand bytes on, now or when the client has read what lies before them."""
        self._pending += data
        self.flush()

    def flush(self) -> None:
        """Hand on what the system takes now."""
        if not self.is_open or not self._pending:
            return
        try:
            del self._pending[: self._socket.send(self._pending)]
        except BlockingIOError:
            pass
        except OSError:
            self.close()
            return
        self._selector.modify(self._socket, self._interest(), self._serve)

    def let_leave(self) -> None:
        """See whether the client has gone: somebody who closes and comes back at once is no second client."""
        for _ in range(_FAREWELL_CHUNKS):
            if not self._take_chunk():
                return

    def close(self) -> None:
        """End the connection; a second call does nothing."""
        if self.is_open:
            self.is_open = False
            self._selector.unregister(self._socket)
            self._socket.close()
            self._left()

    def _serve(self, events: int) -> None:
        if events & selectors.EVENT_READ:
            self._take_chunk()

    def _take_chunk(self) -> bool:
        """Hand one chunk of the client's bytes on; False when there is none, or no client."""
        if not self.is_open:
            return False
        try:
            data = self._socket.recv(_CHUNK_BYTES)
            if data:
                self._heard(data)
        except BlockingIOError:
            return False
        except (OSError, DisconnectedError):
            data = b""
        if not data:
            self.close()
        return bool(data)

    def _interest(self) -> int:
        if not self._pending:
            return selectors.EVENT_READ
        return selectors.EVENT_WRITE | (0 if self.is_full else selectors.EVENT_READ)
