"""A connected socket and what has arrived on it.

It owns connecting, deadlines and the system's options. It knows neither the address's owner nor what is said.
"""

import contextlib
import errno
import os
import socket
from collections.abc import Sequence
from typing import Any

from rigctl.errors import LinkTimeoutError
from rigctl.links.foreign import disconnected
from rigctl.links.inbox import Inbox
from rigctl.links.waiting import READABLE, WRITABLE, wait_ready
from rigctl.timeline import Timeline

_CHUNK_BYTES = 2**16

# Set only where the system knows them. A dead peer is found within 10 s + 3 * 3 s when idle and within 20 s
# when bytes are under way; the system's own defaults are two hours and a quarter of an hour.
_TCP_OPTIONS = (
    ("TCP_NODELAY", 1),
    ("TCP_KEEPIDLE", 10),  # s
    ("TCP_KEEPINTVL", 3),  # s
    ("TCP_KEEPCNT", 3),
    ("TCP_USER_TIMEOUT", 20_000),  # ms
)

Place = tuple[Any, ...]
"""What getaddrinfo returns of one place."""


def find_places(host: str, port: int, address: str) -> Sequence[Place]:
    """Look a host up; at least one place, or `DisconnectedError`."""
    try:
        return socket.getaddrinfo(host, port, type=socket.SOCK_STREAM)
    except OSError as error:
        raise disconnected(error, address) from error


class SocketStream:
    """A connection to the first of a host's places that answers before the deadline; errors as of a `Channel`."""

    def __init__(self, address: str, places: Sequence[Place], timeline: Timeline, deadline_s: float) -> None:
        self._address, self._timeline = address, timeline
        self._inbox = Inbox(address)
        self._socket = self._connected(places, deadline_s)
        _set_options(self._socket)

    def write(self, data: bytes, deadline_s: float) -> None:
        """Send all bytes."""
        left = memoryview(data)
        while left:
            left = left[self.write_some(left, deadline_s) :]

    def write_some(self, data: bytes | memoryview, deadline_s: float) -> int:
        """Send what the system takes, once it takes anything, and return how many bytes that were."""
        if not wait_ready(self._socket.fileno(), WRITABLE, deadline_s, self._timeline):
            raise _takes_nothing(self._address)
        try:
            return self._socket.send(data)
        except BlockingIOError:
            return 0
        except OSError as error:
            raise disconnected(error, self._address) from error

    def readline(self, deadline_s: float) -> bytes:
        """Return bytes up to and including the next LF."""
        while (line := self._inbox.take_line()) is None:
            self._receive(deadline_s)
        return line

    def read_exact(self, count: int, deadline_s: float) -> bytes:
        """Return exactly `count` bytes."""
        while (piece := self._inbox.take_exact(count)) is None:
            self._receive(deadline_s)
        return piece

    def read_some(self, at_most: int, deadline_s: float) -> bytes:
        """Return what is here, at least one byte and at most so many."""
        while not (piece := self._inbox.take_some(at_most)):
            self._receive(deadline_s)
        return piece

    def discard(self) -> bytes:
        """Take away what has arrived unread, without waiting, and return it."""
        with contextlib.suppress(BlockingIOError):
            while True:
                self._take_chunk()
        return self._inbox.take_all()

    def close(self) -> None:
        """Close the connection; a second call does nothing."""
        self._socket.close()

    def _receive(self, deadline_s: float) -> None:
        if not wait_ready(self._socket.fileno(), READABLE, deadline_s, self._timeline):
            raise self._inbox.late()
        with contextlib.suppress(BlockingIOError):
            self._take_chunk()

    def _take_chunk(self) -> None:
        """Take what the socket has; `BlockingIOError` when that is nothing."""
        try:
            chunk = self._socket.recv(_CHUNK_BYTES)
        except BlockingIOError:
            raise
        except OSError as error:
            raise disconnected(error, self._address, partial=self._inbox.peek()) from error
        if not chunk:
            raise disconnected(None, self._address, partial=self._inbox.peek())
        self._inbox.add(chunk)

    def _connected(self, places: Sequence[Place], deadline_s: float) -> socket.socket:
        failure: OSError | None = None
        for family, kind, protocol, _, place in places:
            sock = socket.socket(family, kind, protocol)
            try:
                self._connect(sock, place, deadline_s)
            except OSError as error:
                sock.close()
                failure = error
            except BaseException:
                sock.close()
                raise
            else:
                return sock
        raise disconnected(failure, self._address) from failure

    def _connect(self, sock: socket.socket, place: Place, deadline_s: float) -> None:
        sock.setblocking(False)
        code = sock.connect_ex(place)
        if code == errno.EINPROGRESS:
            if not wait_ready(sock.fileno(), WRITABLE, deadline_s, self._timeline):
                raise _takes_nothing(self._address)
            code = sock.getsockopt(socket.SOL_SOCKET, socket.SO_ERROR)
        if code:
            raise OSError(code, os.strerror(code))


def _takes_nothing(address: str) -> LinkTimeoutError:
    what, do = "the instrument takes no bytes", "check that it is on and not hung"
    return LinkTimeoutError(what, address=address, do=do)


def _set_options(sock: socket.socket) -> None:
    sock.setsockopt(socket.SOL_SOCKET, socket.SO_KEEPALIVE, 1)
    for name, value in _TCP_OPTIONS:
        if (option := getattr(socket, name, None)) is not None:
            sock.setsockopt(socket.IPPROTO_TCP, option, value)
