"""Bytes to and from an instrument that speaks HiSLIP.

It owns the two connections of a session. Answers bear the number of their question here, so one that comes too
late is thrown away; after a wait that ended early the device is cleared before anything else is said.

PyVISA's own HiSLIP is not used, though VISA's other ways are. Measured: a timeout inside a message makes it lose the
bytes that had come and fail at whatever it reads next, its device clear fails when a late answer lies on the line,
and its waits cannot be woken.
"""

import contextlib
from collections.abc import Sequence

from rigctl.errors import FramingError, LinkTimeoutError, PlanError, StopRequestedError
from rigctl.links.addresses import HislipAddress, parse_address
from rigctl.links.hislip_messages import (
    ANY_ID,
    FIRST_ID,
    LONGEST_MESSAGE_BYTES,
    SIZE,
    VERSION,
    Kind,
    Piece,
)
from rigctl.links.hislip_stream import MessageStream
from rigctl.links.inbox import Inbox
from rigctl.links.owner import Ownership
from rigctl.links.stream import Place, SocketStream, find_places
from rigctl.timeline import Timeline

_VENDOR = int.from_bytes(b"PR")
"""Two letters that tell makers of clients apart; nothing depends on them."""


class HislipChannel:
    """A session with `visa://TCPIP0::host::hislip0::INSTR`, begun by the construction within `connect_s`.

    Raises `PlanError` for another kind of address, `BusyError` while another run holds this one,
    `DisconnectedError` when nobody listens there or it serves somebody else, `LinkTimeoutError` when the host
    does not answer, `FramingError` when it speaks something else.
    """

    def __init__(self, address: str, timeline: Timeline, *, connect_s: float = 5.0) -> None:
        parsed = parse_address(address)
        if not isinstance(parsed, HislipAddress):
            raise PlanError(f"'{address}' is not reached by HiSLIP", do="write visa://TCPIP0::host::hislip0::INSTR")
        self.address = address
        self._inbox = Inbox(address)
        self._message_id, self._next_id = ANY_ID, FIRST_ID
        self._is_owed = self._is_delivered = self._has_ended_line = False
        deadline_s = timeline.now() + connect_s
        with contextlib.ExitStack() as undo:
            places = find_places(parsed.host, parsed.port, address)
            place = HislipAddress(str(places[0][4][0]), parsed.device, parsed.port)
            undo.callback(Ownership(address, place=str(place)).close)
            self._sync = self._connected(places, timeline, deadline_s, undo)
            hello = Piece(Kind.INITIALIZE, 0, VERSION << 16 | _VENDOR, parsed.device.encode())
            self._sync.send(hello, deadline_s)
            session = self._sync.expect(Kind.INITIALIZE_RESPONSE, deadline_s).parameter & 0xFFFF
            self._async = self._connected(places, timeline, deadline_s, undo)
            self._async.send(Piece(Kind.ASYNC_INITIALIZE, 0, session), deadline_s)
            self._async.expect(Kind.ASYNC_INITIALIZE_RESPONSE, deadline_s)
            self._longest_bytes = self._agree_on_size(deadline_s)
            self._undo = undo.pop_all()

    def write(self, data: bytes, deadline_s: float) -> None:
        """Send all bytes as one message."""
        if self._is_owed:
            self._clear(deadline_s)
        self._is_owed = True
        for begin in range(0, len(data), self._longest_bytes):
            chunk = data[begin : begin + self._longest_bytes]
            kind = Kind.DATA_END if begin + len(chunk) == len(data) else Kind.DATA
            self._message_id, self._next_id = self._next_id, (self._next_id + 2) & 0xFFFF_FFFF
            self._sync.send(Piece(kind, int(self._is_delivered), self._message_id, chunk), deadline_s)
            self._is_delivered = False
        self._is_owed = False

    def readline(self, deadline_s: float) -> bytes:
        """Return bytes up to and including the next LF; the end of a message stands for one."""
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
        for piece in self._sync.arrived():
            self._accept(piece)
        return self._inbox.take_all()

    def close(self) -> None:
        """Give the address back; a second call does nothing."""
        self._undo.close()

    def _receive(self, deadline_s: float) -> None:
        try:
            piece = self._sync.next(deadline_s)
        except LinkTimeoutError as late:
            self._is_owed = True
            raise self._inbox.late() from late
        except StopRequestedError:
            self._is_owed = True
            raise
        self._accept(piece)

    def _accept(self, piece: Piece) -> None:
        """Keep what answers the last question. An interrupted answer bears an older number, so it needs no more."""
        if not piece.is_data or piece.parameter not in (self._message_id, ANY_ID):
            return
        self._inbox.add(piece.payload)
        if piece.payload:
            self._has_ended_line = piece.payload.endswith(b"\n")
        if piece.is_last and piece.kind == Kind.DATA_END:
            self._is_delivered = True
            if not self._has_ended_line:
                self._inbox.add(b"\n")
            self._has_ended_line = False

    def _clear(self, deadline_s: float) -> None:
        """Have the device forget what it was asked; whatever it still sends before it says so is thrown away."""
        self._async.send(Piece(Kind.ASYNC_DEVICE_CLEAR), deadline_s)
        self._async.expect(Kind.ASYNC_DEVICE_CLEAR_ACKNOWLEDGE, deadline_s)
        self._sync.send(Piece(Kind.DEVICE_CLEAR_COMPLETE), deadline_s)
        self._sync.expect(Kind.DEVICE_CLEAR_ACKNOWLEDGE, deadline_s)
        self._inbox.take_all()
        self._message_id, self._next_id = ANY_ID, FIRST_ID
        self._is_owed = self._is_delivered = self._has_ended_line = False

    def _connected(
        self, places: Sequence[Place], timeline: Timeline, deadline_s: float, undo: contextlib.ExitStack
    ) -> MessageStream:
        stream = SocketStream(self.address, places, timeline, deadline_s)
        undo.callback(stream.close)
        return MessageStream(stream, self.address)

    def _agree_on_size(self, deadline_s: float) -> int:
        """Say how long a message may be, and return how many bytes of data one to the device may hold."""
        offer = Piece(Kind.ASYNC_MAXIMUM_MESSAGE_SIZE, payload=SIZE.pack(LONGEST_MESSAGE_BYTES))
        self._async.send(offer, deadline_s)
        answer = self._async.expect(Kind.ASYNC_MAXIMUM_MESSAGE_SIZE_RESPONSE, deadline_s).payload
        if len(answer) != SIZE.size or (size := SIZE.unpack(answer)[0]) < 1:
            raise FramingError(
                "it names no size of messages",
                address=self.address,
                partial=answer,
                do="check that the instrument speaks HiSLIP",
            )
        return int(min(size, LONGEST_MESSAGE_BYTES))
