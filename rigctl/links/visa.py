"""Bytes to and from an instrument that only VISA reaches: VXI-11, GPIB, USBTMC.

It owns one session of VISA and the ownership of its address. A call of the library blocks and cannot be woken, so
each of its reads is short. The session is taken out of the library's outer layer, which drops the bytes of a read
that ended early, and whose manager, one for the whole process, closes all sessions along with itself. After a wait
that ended early the device is cleared before anything else is said.
"""

import contextlib
from collections.abc import Iterator
from typing import Any

import pyvisa
from pyvisa.constants import AccessModes, ResourceAttribute, StatusCode
from pyvisa.errors import VisaIOError

from rigctl.errors import BusyError, DisconnectedError, LinkError, LinkTimeoutError, PlanError, StopRequestedError
from rigctl.links.addresses import HislipAddress, VisaAddress, parse_address
from rigctl.links.inbox import Inbox
from rigctl.links.owner import Ownership
from rigctl.timeline import Timeline

_CHUNK_BYTES = 2**16
_OPEN_MS = 5000
_POLL_S = 0.05
"""How long one read may block, and so how late a stop request may be seen."""

_FAILURES = {
    StatusCode.error_resource_not_found: ("nothing answers there", "switch the instrument on, and check its address"),
    StatusCode.error_connection_lost: ("the connection is lost", "check the instrument and its cable"),
    StatusCode.error_io: ("the transfer failed", "check the instrument and its cable"),
}


class VisaChannel:
    """A session with an instrument's resource, `visa://GPIB0::7::INSTR`.

    Raises `PlanError` for another kind of address, `BusyError` while another run or program holds this one,
    `DisconnectedError` when VISA cannot reach it, and says why.
    """

    def __init__(self, address: str, timeline: Timeline) -> None:
        parsed = parse_address(address)
        if not isinstance(parsed, VisaAddress | HislipAddress):
            raise PlanError(f"'{address}' is no resource of VISA", do="write visa://GPIB0::7::INSTR")
        self.address = address
        self._timeline = timeline
        self._inbox = Inbox(address)
        self._is_owed = self._is_broken = False
        timeline.stop.check()
        with contextlib.ExitStack() as undo:
            undo.callback(Ownership(address, place=str(parsed)).close)
            with self._translated():
                self._session = _opened(str(parsed).removeprefix("visa://"))
            undo.callback(self._close_session)
            self._undo = undo.pop_all()

    def write(self, data: bytes, deadline_s: float) -> None:
        """Send all bytes as one message; a stop request is seen before, not while."""
        self._timeline.stop.check()
        if self._is_owed:
            self._clear()
        self._is_owed = True
        with self._translated():
            self._allow(deadline_s - self._timeline.now())
            _, status = self._session.write(data)
        if status == StatusCode.error_timeout:
            what, do = "the instrument takes no bytes", "check that it is on and not hung"
            raise LinkTimeoutError(what, address=self.address, do=do)
        self._check(status)
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
        """Take away what was read and not used, and return it.

        The bus is not asked: to an instrument that has nothing to say a read is an error (-420), and one that has
        is interrupted by the next question anyway.
        """
        return self._inbox.take_all()

    def close(self) -> None:
        """Give the address back; a second call does nothing."""
        self._undo.close()

    def _receive(self, deadline_s: float) -> None:
        try:
            while not self._read_once(deadline_s):
                if self._timeline.now() >= deadline_s:
                    raise self._inbox.late()
        except (LinkTimeoutError, StopRequestedError):
            self._is_owed = True
            raise

    def _read_once(self, deadline_s: float) -> bool:
        """Read what comes within a moment; False when that is nothing."""
        self._timeline.stop.check()
        with self._translated():
            self._allow(min(deadline_s - self._timeline.now(), _POLL_S))
            data, status = self._session.read(_CHUNK_BYTES)
        self._inbox.add(bytes(data))
        if status != StatusCode.error_timeout:
            self._check(status)
            if status != StatusCode.success_max_count_read and not data.endswith(b"\n"):
                self._inbox.add(b"\n")
        return bool(data)

    def _clear(self) -> None:
        """Have the device forget what it was asked, where its bus can; the family's resync does the rest."""
        with self._translated():
            self._allow(1.0)
            status = self._session.clear()
        if status != StatusCode.error_nonsupported_operation:
            self._check(status)
        self._inbox.take_all()

    def _allow(self, time_s: float) -> None:
        """Set how long the next call may block; VISA counts whole milliseconds, and 0 is none."""
        self._session.set_attribute(ResourceAttribute.timeout_value, max(round(time_s * 1e3), 1))

    def _check(self, status: StatusCode) -> None:
        if status < 0:
            raise self._failure(status)

    def _failure(self, status: int) -> LinkError:
        self._is_broken = True
        if status == StatusCode.error_resource_locked:
            what, do = "another program has locked it", "close that program"
            return BusyError(what, address=self.address, do=do)
        fallback = f"VISA says: {VisaIOError(status)}", "check the instrument and its cable"
        what, do = _FAILURES.get(StatusCode(status), fallback)
        return DisconnectedError(what, address=self.address, partial=self._inbox.peek(), do=do)

    def _close_session(self) -> None:
        """Say farewell where somebody is left to hear it: else that takes seconds, and leaves the socket open."""
        with contextlib.suppress(LinkError), self._translated():
            end = self._session.interface if self._is_broken else self._session
            end.close()

    @contextlib.contextmanager
    def _translated(self) -> Iterator[None]:
        try:
            yield
        except VisaIOError as error:
            raise self._failure(error.error_code) from error
        except Exception as error:  # each bus raises what its own library raises
            self._is_broken = True
            raise DisconnectedError(
                f"VISA failed ({type(error).__name__}: {error})",
                address=self.address,
                partial=self._inbox.peek(),
                do="check the instrument, its cable, and that what VISA needs for this bus is installed",
            ) from error


def _opened(resource: str) -> Any:
    """Open a session and take it out of the library's hands."""
    manager = pyvisa.ResourceManager("@py")
    library: Any = manager.visalib
    handle, _ = library.open(manager.session, resource, AccessModes.no_lock, _OPEN_MS)
    return library.sessions.pop(handle)
