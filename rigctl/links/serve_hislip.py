"""A twin behind a small HiSLIP server: what VISA reaches, for one session at a time.

It owns the server's half of the protocol: beginning a session, data both ways, the size of messages, the device
clear and the status query. It offers no locks, no service requests and no overlapped mode.

Source
------
IVI-6.1 IVI High-Speed LAN Instrument Protocol (HiSLIP) 1.0, synchronized mode; from memory, and met by an
independent client in the tests.
"""

import re
import selectors
import socket

from rigctl.errors import DisconnectedError, FramingError
from rigctl.links.addresses import HislipAddress
from rigctl.links.channel import Twin
from rigctl.links.hislip_messages import (
    ANY_ID,
    LONGEST_MESSAGE_BYTES,
    SIZE,
    UNKNOWN_KIND,
    VERSION,
    Fatal,
    Kind,
    MessageReader,
    Piece,
)
from rigctl.links.served import HOST, Client
from rigctl.timeline import Timeline

_LINES = re.compile(rb"[^\n]*\n|[^\n]+")
_WAS_DELIVERED = 0x01
"""Bit of a control code: the client has handed the end of the last answer on."""
_MESSAGE_AVAILABLE = 0x10
"""Bit of the status byte. Source: IEEE 488.2-1992, 11.2; from memory."""


class _Connection:
    """One connection of a session, which its first message makes the synchronous or the asynchronous one."""

    def __init__(self, sock: socket.socket, selector: selectors.BaseSelector, port: "HislipPort") -> None:
        self._port = port
        self._reader = MessageReader(port.address)
        self.client = Client(sock, selector, heard=self._hear, left=lambda: port.forget(self))

    def send(self, message: Piece) -> None:
        """Hand a message on."""
        self.client.send(message.pack())

    def refuse(self, code: Fatal, words: str) -> None:
        """Say why, and end."""
        self.send(Piece(Kind.FATAL_ERROR, code, payload=words.encode()))
        self.client.close()

    def _hear(self, data: bytes) -> None:
        self._reader.add(data)
        try:
            while self.client.is_open and (piece := self._reader.take()) is not None:
                self._port.obey(self, piece)
        except FramingError as error:
            self.refuse(Fatal.BAD_HEADER, error.what)


class HislipPort:
    """One twin, its listening socket, and the two connections of the session it may have."""

    def __init__(self, twin: Twin, timeline: Timeline, selector: selectors.BaseSelector, *, device: str) -> None:
        self._twin, self._timeline, self._selector = twin, timeline, selector
        self._listener = socket.create_server((HOST, 0))
        self._listener.setblocking(False)
        selector.register(self._listener, selectors.EVENT_READ, self._accept)
        self.address = str(HislipAddress(HOST, device, self._listener.getsockname()[1]))
        self._device = device
        self._connections: list[_Connection] = []
        self._sync: _Connection | None = None
        self._async: _Connection | None = None
        self._session = 0
        self._message_id = ANY_ID
        self._longest_bytes = LONGEST_MESSAGE_BYTES
        self._is_clearing = self._has_said = False

    def ready_in_s(self) -> float | None:
        """How long until the twin has bytes to fetch; None: it has none, or the client must read first."""
        ready_s = self._twin.next_ready_s()
        if ready_s is None or (self._sync is not None and self._sync.client.is_full):
            return None
        return max(ready_s - self._timeline.now(), 0.0)

    def pump(self) -> None:
        """Fetch what the twin has ready and hand it on, a message a line; without a session it is lost."""
        if self.ready_in_s() == 0.0:
            try:
                self._say(self._twin.take(self._timeline.now()))
            except DisconnectedError:
                self._end_session()
        for connection in list(self._connections):
            connection.client.flush()

    def close(self) -> None:
        """Close the session and the port."""
        for connection in list(self._connections):
            connection.client.close()
        self._selector.unregister(self._listener)
        self._listener.close()

    def obey(self, connection: _Connection, piece: Piece) -> None:
        """Do what a message says."""
        match piece.kind:
            case Kind.INITIALIZE:
                self._begin(connection, piece)
            case Kind.ASYNC_INITIALIZE:
                self._join(connection, piece)
            case _ if self._sync is None or self._async is None:
                connection.refuse(Fatal.NOT_BOTH_CHANNELS, "both connections come first")
            case Kind.DATA | Kind.DATA_END if connection is self._sync:
                self._hear(piece)
            case Kind.DEVICE_CLEAR_COMPLETE if connection is self._sync:
                self._twin.take(self._timeline.now())
                self._is_clearing = self._has_said = False
                self._message_id = ANY_ID
                connection.send(Piece(Kind.DEVICE_CLEAR_ACKNOWLEDGE))
            case _ if connection is self._async:
                connection.send(self._aside(piece))
            case _:
                connection.send(_unknown(piece))

    def forget(self, connection: _Connection) -> None:
        """A connection has ended; a session ends with either of its two, once its last words were heard."""
        self._connections.remove(connection)
        if connection is self._async and self._sync is not None:
            self._sync.client.let_leave()
        if connection in (self._sync, self._async):
            self._end_session()

    def _accept(self, _events: int) -> None:
        try:
            sock, _ = self._listener.accept()
        except OSError:  # it left before it was let in
            return
        self._connections.append(_Connection(sock, self._selector, self))

    def _begin(self, connection: _Connection, piece: Piece) -> None:
        if self._sync is not None:
            self._sync.client.let_leave()
        if self._sync is not None:
            connection.refuse(Fatal.TOO_MANY_CLIENTS, "one session at a time")
        elif piece.payload.decode("ascii", "replace").lower() != self._device:
            connection.refuse(Fatal.BAD_INITIALIZATION, f"there is only {self._device} here")
        else:
            self._sync = connection
            self._session = (self._session + 1) & 0xFFFF
            self._message_id, self._longest_bytes = ANY_ID, LONGEST_MESSAGE_BYTES
            self._is_clearing = self._has_said = False
            connection.send(Piece(Kind.INITIALIZE_RESPONSE, 0, VERSION << 16 | self._session))

    def _join(self, connection: _Connection, piece: Piece) -> None:
        if self._sync is None or self._async is not None or piece.parameter != self._session:
            connection.refuse(Fatal.BAD_INITIALIZATION, "no such session")
        else:
            self._async = connection
            connection.send(Piece(Kind.ASYNC_INITIALIZE_RESPONSE))

    def _hear(self, piece: Piece) -> None:
        """Hand data to the twin; the end of a message ends its last line too."""
        if self._is_clearing:
            return
        self._message_id, self._has_said = piece.parameter, False
        ends = piece.is_last and piece.kind == Kind.DATA_END and not piece.payload.endswith(b"\n")
        self._twin.receive(piece.payload + b"\n" * ends, self._timeline.now())

    def _aside(self, piece: Piece) -> Piece:
        """Answer on the asynchronous connection."""
        match piece.kind:
            case Kind.ASYNC_MAXIMUM_MESSAGE_SIZE if len(piece.payload) == SIZE.size:
                self._longest_bytes = max(min(SIZE.unpack(piece.payload)[0], LONGEST_MESSAGE_BYTES), 1)
                return Piece(Kind.ASYNC_MAXIMUM_MESSAGE_SIZE_RESPONSE, payload=SIZE.pack(LONGEST_MESSAGE_BYTES))
            case Kind.ASYNC_DEVICE_CLEAR:
                self._is_clearing = True
                return Piece(Kind.ASYNC_DEVICE_CLEAR_ACKNOWLEDGE)
            case Kind.ASYNC_STATUS_QUERY:
                self._has_said &= not piece.control & _WAS_DELIVERED
                return Piece(Kind.ASYNC_STATUS_RESPONSE, _MESSAGE_AVAILABLE * self._has_said)
            case _:
                return _unknown(piece)

    def _say(self, data: bytes) -> None:
        if self._sync is None or self._is_clearing:
            return
        messages = bytearray()  # what is ready at once leaves at once
        for line in _LINES.findall(data):
            for begin in range(0, len(line), self._longest_bytes):
                chunk = line[begin : begin + self._longest_bytes]
                kind = Kind.DATA_END if chunk.endswith(b"\n") else Kind.DATA
                messages += Piece(kind, 0, self._message_id, chunk).pack()
        self._has_said |= bool(messages)
        self._sync.client.send(bytes(messages))

    def _end_session(self) -> None:
        ended, self._sync, self._async = (self._sync, self._async), None, None
        for connection in ended:
            if connection is not None:
                connection.client.close()


def _unknown(piece: Piece) -> Piece:
    return Piece(Kind.ERROR, UNKNOWN_KIND, payload=f"messages of kind {piece.kind} are not known here".encode())
