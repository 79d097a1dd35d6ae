"""Bytes to and from an instrument on the network.

It owns one socket and the ownership of its address. Each wait is a poll on the socket and on the stop
request's wake pipe, so a request ends it at once; never a select, which fails above 1023 open files.
"""

import contextlib
import errno
import os
import select
import socket
from collections.abc import Sequence
from typing import Any

from rigctl.errors import LinkTimeoutError
from rigctl.links.addresses import TcpAddress, parse_address
from rigctl.links.foreign import disconnected
from rigctl.links.inbox import Inbox
from rigctl.links.owner import Ownership
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

_Place = tuple[Any, ...]  # what getaddrinfo returns of one address


class TcpChannel:
    """A connection to `tcp://host:port`, made by the construction within `connect_s`.

    Raises `PlanError` for another kind of address, `BusyError` while another run holds this one,
    `DisconnectedError` when nobody listens there, `LinkTimeoutError` when the host does not answer.
    """

    def __init__(self, address: str, timeline: Timeline, *, connect_s: float = 5.0) -> None:
        parsed = parse_address(address)
        self.address = address
        self._timeline = timeline
        self._inbox = Inbox(address)
        places = self._places(parsed)
        found = TcpAddress(str(places[0][4][0]), parsed.port)
        self._owner = Ownership(address, place=str(found))
        try:
            self._socket = self._connected(places, timeline.now() + connect_s)
            self._set_options()
        except BaseException:
            self._owner.close()
            raise

    def write(self, data: bytes, deadline_s: float) -> None:
        """Send all bytes."""
        left = memoryview(data)
        while left:
            self._wait(self._socket, select.POLLOUT, deadline_s)
            try:
                left = left[self._socket.send(left) :]
            except BlockingIOError:
                continue
            except OSError as error:
                raise disconnected(error, self.address) from error

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

    def discard(self) -> bytes:
        """Take away what has arrived unread, without waiting, and return it."""
        with contextlib.suppress(BlockingIOError):
            while True:
                self._take_chunk()
        return self._inbox.take_all()

    def close(self) -> None:
        """Give the address back; a second call does nothing."""
        self._socket.close()
        self._owner.close()

    def _receive(self, deadline_s: float) -> None:
        self._wait(self._socket, select.POLLIN, deadline_s)
        with contextlib.suppress(BlockingIOError):
            self._take_chunk()

    def _take_chunk(self) -> None:
        """Take what the socket has; `BlockingIOError` when that is nothing."""
        try:
            chunk = self._socket.recv(_CHUNK_BYTES)
        except BlockingIOError:
            raise
        except OSError as error:
            raise disconnected(error, self.address, partial=self._inbox.peek()) from error
        if not chunk:
            raise disconnected(None, self.address, partial=self._inbox.peek())
        self._inbox.add(chunk)

    def _wait(self, sock: socket.socket, event: int, deadline_s: float) -> None:
        """Wait until the socket is ready, the deadline passes or a stop is asked for."""
        stop = self._timeline.stop
        while True:
            stop.check()
            poller = select.poll()
            poller.register(sock, event)
            if not stop.reasons:  # a request that is held back keeps the pipe readable: polled, it would spin
                poller.register(stop.wake_fd, select.POLLIN)
            left_s = deadline_s - self._timeline.now()
            ready = poller.poll(max(left_s, 0.0) * 1e3)
            if any(fd == sock.fileno() for fd, _ in ready):
                return
            if left_s <= 0.0:
                raise self._late(event)

    def _late(self, event: int) -> LinkTimeoutError:
        if event == select.POLLIN:
            return self._inbox.late()
        what, do = "the instrument takes no bytes", "check that it is on and not hung"
        return LinkTimeoutError(what, address=self.address, do=do)

    def _places(self, address: TcpAddress) -> Sequence[_Place]:
        try:
            return socket.getaddrinfo(address.host, address.port, type=socket.SOCK_STREAM)
        except OSError as error:
            raise disconnected(error, self.address) from error

    def _connected(self, places: Sequence[_Place], deadline_s: float) -> socket.socket:
        """Connect to the first of the host's places that answers."""
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
        raise disconnected(failure, self.address) from failure

    def _connect(self, sock: socket.socket, place: _Place, deadline_s: float) -> None:
        sock.setblocking(False)
        code = sock.connect_ex(place)
        if code == errno.EINPROGRESS:
            self._wait(sock, select.POLLOUT, deadline_s)
            code = sock.getsockopt(socket.SOL_SOCKET, socket.SO_ERROR)
        if code:
            raise OSError(code, os.strerror(code))

    def _set_options(self) -> None:
        self._socket.setsockopt(socket.SOL_SOCKET, socket.SO_KEEPALIVE, 1)
        for name, value in _TCP_OPTIONS:
            if (option := getattr(socket, name, None)) is not None:
                self._socket.setsockopt(socket.IPPROTO_TCP, option, value)
