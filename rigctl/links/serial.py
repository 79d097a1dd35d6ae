"""Bytes to and from an instrument on a serial port.

It owns one open port and the ownership of its address. The library opens and sets the port and is asked nothing
else: its reads restart their deadline at every byte and its waits cannot be woken by a stop request.
"""

import contextlib
import errno
import os
import termios

import serial

from rigctl.errors import BusyError, LinkTimeoutError, PlanError
from rigctl.links.addresses import SerialAddress, parse_address
from rigctl.links.family import Opening
from rigctl.links.foreign import disconnected
from rigctl.links.inbox import Inbox
from rigctl.links.owner import Ownership
from rigctl.links.waiting import READABLE, WRITABLE, wait_ready
from rigctl.timeline import Timeline

_CHUNK_BYTES = 2**12


class SerialChannel:
    """An open port, `serial:///path?baud=rate`; its path is looked up anew at every opening.

    Raises `PlanError` for another kind of address, `BusyError` while another run or program holds the port,
    `DisconnectedError` when there is no such port or it cannot be set.
    """

    def __init__(self, address: str, timeline: Timeline, opening: Opening) -> None:
        parsed = parse_address(address)
        if not isinstance(parsed, SerialAddress):
            raise PlanError(f"'{address}' is no serial port", do="write serial:///path?baud=rate")
        self.address = address
        self._timeline = timeline
        self._inbox = Inbox(address)
        with contextlib.ExitStack() as undo:
            owner = Ownership(address, place=f"serial{os.path.realpath(parsed.path)}")
            undo.callback(owner.close)
            self._port = _opened(parsed, opening, address)
            undo.callback(self._port.close)
            if opening.quiet_s:
                timeline.wait_until(timeline.now() + opening.quiet_s)
                self.discard()
            self._undo = undo.pop_all()

    def write(self, data: bytes, deadline_s: float) -> None:
        """Send all bytes; they are in the port's own buffer then, not yet on the wire."""
        left = memoryview(data)
        while left:
            if not wait_ready(self._port.fileno(), WRITABLE, deadline_s, self._timeline):
                what, do = "the port takes no bytes", "check the cable and the instrument's flow control"
                raise LinkTimeoutError(what, address=self.address, do=do)
            try:
                left = left[os.write(self._port.fileno(), left) :]
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
        while self._take_chunk():
            pass
        return self._inbox.take_all()

    def close(self) -> None:
        """Give the address back; a second call does nothing."""
        self._undo.close()

    def _receive(self, deadline_s: float) -> None:
        if not wait_ready(self._port.fileno(), READABLE, deadline_s, self._timeline):
            raise self._inbox.late()
        if not self._take_chunk():  # ready without bytes is how a port says that it has been pulled out
            gone = OSError(errno.EIO, os.strerror(errno.EIO))
            raise disconnected(gone, self.address, partial=self._inbox.peek())

    def _take_chunk(self) -> bool:
        """Take what the port has; False when that is nothing."""
        try:
            chunk = os.read(self._port.fileno(), _CHUNK_BYTES)
        except BlockingIOError:
            return False
        except OSError as error:
            raise disconnected(error, self.address, partial=self._inbox.peek()) from error
        self._inbox.add(chunk)
        return bool(chunk)


def _opened(parsed: SerialAddress, opening: Opening, address: str) -> serial.Serial:
    """Open a port and set it; DTR and RTS are set before, for raising them first already restarts a board."""
    port = serial.Serial(
        baudrate=parsed.baud,
        bytesize=int(parsed.format[0]),
        parity=parsed.format[1],
        stopbits=int(parsed.format[2]),
        exclusive=True,
    )
    port.dtr = port.rts = opening.asserts_dtr
    port.port = parsed.path
    try:
        port.open()
    except OSError as error:
        if error.errno in (errno.EBUSY, errno.EAGAIN):
            what, do = "another program has this port open", "close that program"
            raise BusyError(what, address=address, do=do) from error
        raise disconnected(error, address) from error
    except (termios.error, ValueError) as error:  # what is no serial port, or knows no such speed
        raise disconnected(OSError(str(error)), address) from error
    return port
