"""The messages of HiSLIP, for both ends of it.

It owns their form and their numbers: bytes in, pieces of messages out. It has no socket and no clock.

Source
------
IVI-6.1 IVI High-Speed LAN Instrument Protocol (HiSLIP) 1.0, tables 3 to 5 and 15; from memory, and met against
an independent client in the tests.
"""

import struct
from dataclasses import dataclass
from enum import IntEnum

from rigctl.errors import FramingError
from rigctl.links.inbox import Inbox

_HEADER = struct.Struct("!2sBBIQ")  # prologue, kind, control code, parameter, length of the payload
SIZE = struct.Struct("!Q")
"""The payload of both messages about the largest message."""

VERSION = 0x0100
"""Major and minor version, 1.0."""
FIRST_ID, ANY_ID = 0xFFFF_FF00, 0xFFFF_FFFF
"""The first message of a session or after a device clear, and an answer that belongs to no message."""
LONGEST_MESSAGE_BYTES = 2**20
LONGEST_CONTROL_BYTES = 2**12
"""Payloads of messages that carry no data are names and sizes; a longer one is garbage."""


class Kind(IntEnum):
    """What a message is."""

    INITIALIZE = 0
    INITIALIZE_RESPONSE = 1
    FATAL_ERROR = 2
    ERROR = 3
    DATA = 6
    DATA_END = 7
    DEVICE_CLEAR_COMPLETE = 8
    DEVICE_CLEAR_ACKNOWLEDGE = 9
    ASYNC_MAXIMUM_MESSAGE_SIZE = 15
    ASYNC_MAXIMUM_MESSAGE_SIZE_RESPONSE = 16
    ASYNC_INITIALIZE = 17
    ASYNC_INITIALIZE_RESPONSE = 18
    ASYNC_DEVICE_CLEAR = 19
    ASYNC_STATUS_QUERY = 21
    ASYNC_STATUS_RESPONSE = 22
    ASYNC_DEVICE_CLEAR_ACKNOWLEDGE = 23


class Fatal(IntEnum):
    """Control codes of a fatal error."""

    BAD_HEADER = 1
    NOT_BOTH_CHANNELS = 2
    BAD_INITIALIZATION = 3
    TOO_MANY_CLIENTS = 4


UNKNOWN_KIND = 1
"""Control code of an error: the message's kind is not known here."""


@dataclass(frozen=True, slots=True)
class Piece:
    """A message, or of one that carries data a part of it as it came; `is_last` ends the message.

    `kind` is a plain number: peers may know more kinds than are named here.
    """

    kind: int
    control: int = 0
    parameter: int = 0
    payload: bytes = b""
    is_last: bool = True

    @property
    def is_data(self) -> bool:
        """Whether the payload belongs to what is said, not to how it is carried."""
        return self.kind in (Kind.DATA, Kind.DATA_END)

    def pack(self) -> bytes:
        """Return the bytes of a whole message."""
        return _HEADER.pack(b"HS", self.kind, self.control, self.parameter, len(self.payload)) + self.payload


class MessageReader:
    """Cuts what arrives on one connection into messages; `FramingError` where it is none."""

    def __init__(self, address: str) -> None:
        self._address = address
        self._inbox = Inbox(address)
        self._header: tuple[int, int, int] | None = None
        self._left = 0

    def add(self, data: bytes) -> None:
        """Append what has just arrived."""
        self._inbox.add(data)

    def take(self) -> Piece | None:
        """Return the next piece; None while nothing new is here."""
        if self._header is None and not self._begin():
            return None
        assert self._header is not None
        kind, control, parameter = self._header
        payload = self._inbox.take_some(self._left) if kind in (Kind.DATA, Kind.DATA_END) else self._whole()
        if payload is None or (self._left and not payload):
            return None
        self._left -= len(payload)
        if is_last := self._left == 0:
            self._header = None
        return Piece(kind, control, parameter, payload, is_last)

    def _whole(self) -> bytes | None:
        if self._left > LONGEST_CONTROL_BYTES:
            raise self._no_message(f"a message claims {self._left} bytes")
        return self._inbox.take_exact(self._left)

    def _begin(self) -> bool:
        head = self._inbox.take_exact(_HEADER.size)
        if head is None:
            return False
        prologue, kind, control, parameter, self._left = _HEADER.unpack(head)
        if prologue != b"HS":
            raise self._no_message(f"{head!r} begins no message")
        self._header = kind, control, parameter
        return True

    def _no_message(self, what: str) -> FramingError:
        do = "check that the instrument speaks HiSLIP, which its manual calls a LAN interface of its own"
        return FramingError(what, address=self._address, partial=self._inbox.peek(), do=do)
