"""A wire tap: every transfer of a channel as one line of text.

It owns the lines' form and changes nothing that passes:

    instant, s; direction; address; bytes
        12.345678 -> tcp://10.0.0.7:5025 b'*IDN?\\n'
        12.391042 <- tcp://10.0.0.7:5025 b'1.2E-03\\n'
        15.391507 !! tcp://10.0.0.7:5025 b'1.2' LinkTimeoutError

`->` went to the instrument, `<-` came from it, `<x` came and was thrown away, `!!` is a transfer that failed,
with the bytes that had come.
"""

from collections.abc import Callable
from typing import TextIO, TypeVar

from rigctl.errors import LinkError, PolrigError, RecordError
from rigctl.links.channel import Channel
from rigctl.timeline import Timeline

T = TypeVar("T")


class TappedChannel:
    """A channel with a tap on it; several may share one sink.

    A sink that fails is closed and told once, as `RecordError`; bytes pass on without it, so that the bench
    can still be made safe.
    """

    def __init__(self, channel: Channel, timeline: Timeline, sink: TextIO) -> None:
        self.address = channel.address
        self._channel, self._timeline, self._sink = channel, timeline, sink

    def write(self, data: bytes, deadline_s: float) -> None:
        """Send all bytes."""
        self._told(lambda: self._channel.write(data, deadline_s))
        self._tell("->", data)

    def readline(self, deadline_s: float) -> bytes:
        """Return bytes up to and including the next LF."""
        line = self._told(lambda: self._channel.readline(deadline_s))
        self._tell("<-", line)
        return line

    def read_exact(self, count: int, deadline_s: float) -> bytes:
        """Return exactly `count` bytes."""
        data = self._told(lambda: self._channel.read_exact(count, deadline_s))
        self._tell("<-", data)
        return data

    def discard(self) -> bytes:
        """Take away what has arrived unread, without waiting, and return it."""
        stale = self._told(self._channel.discard)
        if stale:
            self._tell("<x", stale)
        return stale

    def close(self) -> None:
        """Give the address back; a second call does nothing. The sink stays open."""
        self._channel.close()

    def _told(self, transfer: Callable[[], T]) -> T:
        try:
            return transfer()
        except PolrigError as error:
            partial = error.partial if isinstance(error, LinkError) else b""
            self._tell("!!", partial, f" {type(error).__name__}")
            raise

    def _tell(self, direction: str, data: bytes, remark: str = "") -> None:
        if self._sink.closed:
            return
        try:
            self._sink.write(f"{self._timeline.now():13.6f} {direction} {self.address} {data!r}{remark}\n")
            self._sink.flush()
        except OSError as error:
            _close_quietly(self._sink)
            raise RecordError(
                f"the trace cannot be written ({error.strerror})",
                where=str(getattr(self._sink, "name", "trace")),
                do="free some space, or run without the trace",
            ) from error


def _close_quietly(sink: TextIO) -> None:
    """Close a sink that has failed; its unwritten rest fails once more, which is no news."""
    try:
        sink.close()
    except OSError:
        return
