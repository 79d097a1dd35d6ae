"""Bytes that have arrived and wait to be read.

It owns the cutting into lines and counted pieces, the same for every channel. It neither waits nor receives.
"""

from rigctl.errors import FramingError, LinkTimeoutError

LONGEST_LINE_BYTES = 2**20
"""A line that has not ended by then is no reply: 1 MiB is some 60,000 readings as text."""


class Inbox:
    """What came from one address and has not been read."""

    def __init__(self, address: str) -> None:
        self._address = address
        self._bytes = bytearray()
        self._searched = 0

    def add(self, chunk: bytes) -> None:
        """Append what has just arrived."""
        self._bytes += chunk

    def take_line(self) -> bytes | None:
        """Cut off the bytes up to and including the first LF; None while there is none."""
        end = self._bytes.find(b"\n", self._searched)
        if end >= 0:
            return self._cut(end + 1)
        self._searched = len(self._bytes)
        if self._searched > LONGEST_LINE_BYTES:
            raise FramingError(
                f"{self._searched} bytes came without an end of line",
                address=self._address,
                partial=self.peek(),
                do="check that the driver fits this instrument",
            )
        return None

    def take_exact(self, count: int) -> bytes | None:
        """Cut off `count` bytes; None while there are fewer."""
        return self._cut(count) if len(self._bytes) >= count else None

    def take_some(self, at_most: int) -> bytes:
        """Cut off what is here, up to `at_most` bytes."""
        return self._cut(min(at_most, len(self._bytes)))

    def take_all(self) -> bytes:
        """Cut off everything."""
        return self._cut(len(self._bytes)) if self._bytes else b""

    def peek(self) -> bytes:
        """Everything, left where it is."""
        return bytes(self._bytes)

    def late(self) -> LinkTimeoutError:
        """Say that the rest did not come in time; the bytes stay, as the beginning of what may still come."""
        partial = self.peek()
        got = f"only {partial[-80:]!r} came" if partial else "nothing came"
        return LinkTimeoutError(
            f"no complete reply in time; {got}",
            address=self._address,
            partial=partial,
            do="check that the instrument is on, and that the driver fits it",
        )

    def _cut(self, count: int) -> bytes:
        head = bytes(self._bytes[:count])
        del self._bytes[:count]
        self._searched = 0
        return head
