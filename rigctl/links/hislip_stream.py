"""Messages on one of a HiSLIP session's two connections.

It owns the framing on the wire: a message that was sent in part is sent to its end before the next one, and one
that came in part goes on where it ended.
"""

from collections.abc import Iterator

from rigctl.errors import BusyError, DisconnectedError, FramingError, LinkError, LinkTimeoutError, StopRequestedError
from rigctl.links.hislip_messages import Fatal, Kind, MessageReader, Piece
from rigctl.links.stream import SocketStream

_CHUNK_BYTES = 2**16


class MessageStream:
    """A connection that carries messages; errors as of a `Channel`, and `BusyError` when it serves somebody else."""

    def __init__(self, stream: SocketStream, address: str) -> None:
        self._stream, self._address = stream, address
        self._reader = MessageReader(address)
        self._unsent = b""

    def send(self, message: Piece, deadline_s: float) -> None:
        """Send a whole message; when the wait ends before its first byte has left, it is never sent."""
        self._flush(deadline_s)
        packed = message.pack()
        self._unsent = packed
        try:
            self._flush(deadline_s)
        except (LinkTimeoutError, StopRequestedError):
            if len(self._unsent) == len(packed):
                self._unsent = b""
            raise

    def next(self, deadline_s: float) -> Piece:
        """Wait for the next piece of a message."""
        while (piece := self._taken()) is None:
            self._reader.add(self._stream.read_some(_CHUNK_BYTES, deadline_s))
        return piece

    def expect(self, kind: Kind, deadline_s: float) -> Piece:
        """Wait for a message of a kind; whatever comes before it is thrown away."""
        while (piece := self.next(deadline_s)).kind != kind:
            pass
        return piece

    def arrived(self) -> Iterator[Piece]:
        """Yield the pieces that are here, without waiting."""
        self._reader.add(self._stream.discard())
        while (piece := self._taken()) is not None:
            yield piece

    def _flush(self, deadline_s: float) -> None:
        while self._unsent:
            self._unsent = self._unsent[self._stream.write_some(self._unsent, deadline_s) :]

    def _taken(self) -> Piece | None:
        piece = self._reader.take()
        if piece is not None and piece.kind in (Kind.FATAL_ERROR, Kind.ERROR):
            raise self._complaint(piece)
        return piece

    def _complaint(self, piece: Piece) -> LinkError:
        words = piece.payload.decode("ascii", "replace") or f"code {piece.control}"
        if piece.kind == Kind.ERROR:
            do = "check that the driver fits this instrument"
            return FramingError(f"the instrument did not take a message: {words}", address=self._address, do=do)
        if piece.control == Fatal.TOO_MANY_CLIENTS:
            do = "end the program that holds the instrument"
            return BusyError(f"the instrument serves somebody else: {words}", address=self._address, do=do)
        do = "see whether the instrument restarted, and open it again"
        return DisconnectedError(f"the instrument ended the session: {words}", address=self._address, do=do)
