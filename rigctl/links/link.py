"""One link to one address: questions and answers that belong together.

It owns the promise that what it returns answers what was just asked. It knows no command: how replies are
framed beyond lines and blocks, and how a lost step is found again, is the family's. It never sends a question
twice.

A link is out of step from the moment it is opened, and again whenever something is asked and the whole
answer has not come: the deadline passed, a stop was asked for, the bytes were no reply. Nothing passes then
before the family's resync has succeeded. What a byte stream cannot show is a second copy of an older reply
that arrives while the next question is open, in a piece of its own, before the answer: that is seen only
afterwards.
"""

import threading
from collections.abc import Callable
from typing import TypeVar

from rigctl.errors import DisconnectedError, FramingError, LinkError, LinkTimeoutError, RefusedError
from rigctl.links.channel import Channel
from rigctl.links.family import Family, Resynced
from rigctl.timeline import Timeline

T = TypeVar("T")

LONGEST_BLOCK_BYTES = 64 * 2**20
"""Larger blocks are taken for garbage; far above what a spectrum or a waveform needs."""

LONGEST_DISCARDED_BYTES = 4096
"""Of what was thrown away no more than this is kept; far more than a few lines said unasked."""


class Link:
    """The way to one address, shared by everything behind it; opened at its first use.

    A connection that was lost stays lost until `open` is called: the instrument may have lost its settings
    with it, so whoever opens it again has to identify and set it again.
    """

    def __init__(self, address: str, open_channel: Callable[[], Channel], family: Family, timeline: Timeline) -> None:
        self.address, self.family, self.timeline = address, family, timeline
        self.lock = threading.RLock()
        self.is_in_step = False
        self._open_channel = open_channel
        self._channel: Channel | None = None
        self._is_lost = False
        self._discarded = b""

    def open(self) -> None:
        """Take hold of the address; does nothing while it is held."""
        with self.lock:
            self._take_hold()

    def close(self) -> None:
        """Give the address back; a second call does nothing."""
        with self.lock:
            channel, self._channel = self._channel, None
            self.is_in_step = False
            if channel is not None:
                channel.close()

    def mark_out_of_step(self) -> None:
        """Have the link resync before anything else passes, as after a reply that made no sense."""
        self.is_in_step = False

    def resync(self) -> Resynced:
        """Find the step again now, as the family does it; `LinkError` when it cannot be had."""
        with self.lock:
            channel = self._held()
            self.is_in_step = False
            try:
                found = self.family.resync(channel, self.timeline.now() + self.family.longest_s)
            except DisconnectedError:
                self._lose()
                raise
            self.is_in_step = True
            self._discarded += b"\n".join(found.stale)
            return found

    def take_discarded(self) -> bytes:
        """Return what came unasked or too late since the last call; it answers nothing that was asked.

        A convention whose instruments speak unasked, as by an alarm, looks for that here.
        """
        discarded, self._discarded = self._discarded, b""
        return discarded[-LONGEST_DISCARDED_BYTES:]

    def write(self, data: bytes) -> None:
        """Send what nothing is answered to."""
        self._transact(data, lambda _channel, _deadline_s: None, timeout_s=None)

    def interrupt(self, data: bytes) -> None:
        """Send bytes that act at once, whatever is under way and even while the link is out of step.

        For what must not wait for a resync, such as a feed hold. Nothing is answered to them.
        """
        with self.lock:
            channel = self._held()
            try:
                channel.write(data, self.timeline.now() + self.family.reply_timeout_s)
            except DisconnectedError:
                self._lose()
                raise
            except LinkError:
                self.is_in_step = False
                raise

    def exchange(
        self,
        data: bytes,
        *,
        is_last: Callable[[bytes], bool] | None = None,
        timeout_s: float | None = None,
    ) -> tuple[bytes, ...]:
        """Ask and return the lines of the answer.

        Parameters
        ----------
        data
            The question with its terminator.
        is_last
            Whether a line is the last of the answer; None: the answer is one line, and more than one line at
            once is no answer. A convention that brings its own last line may also speak unasked; what comes
            after that line makes the next exchange resync.
        timeout_s
            Until the whole answer is here, s; None: the family's.

        Returns
        -------
        The lines up to and including the last, without LF and without one CR before it.

        Raises
        ------
        LinkTimeoutError
            No complete answer in time; it carries the line that came in part.
        RefusedError
            No answer in time, and the instrument says why: its oldest complaint.
        FramingError, DisconnectedError, StopRequestedError
            As the channel tells them.
        """

        def read(channel: Channel, deadline_s: float) -> tuple[bytes, ...]:
            if is_last is None:
                line = _bare(channel.readline(deadline_s))
                self._refuse_more(channel, line)
                return (line,)
            lines = [_bare(channel.readline(deadline_s))]
            while not is_last(lines[-1]):
                lines.append(_bare(channel.readline(deadline_s)))
            return tuple(lines)

        return self._transact(data, read, timeout_s=timeout_s)

    def exchange_block(self, data: bytes, *, timeout_s: float | None = None) -> bytes:
        """Ask and return the content of a definite-length block.

        A block of indefinite length (`#0`) ends with a line signal that a byte stream does not have, so it is
        refused with `FramingError`; else as `exchange`.

        Source
        ------
        IEEE 488.2-1992, definite and indefinite length arbitrary block response data; from memory.
        """

        def read(channel: Channel, deadline_s: float) -> bytes:
            size = self._block_size(channel, deadline_s)
            block = channel.read_exact(size, deadline_s)
            if end := _bare(channel.readline(deadline_s)):
                raise self._no_reply(f"a block of {size} bytes goes on after its end", end)
            self._refuse_more(channel, b"")
            return block

        return self._transact(data, read, timeout_s=timeout_s)

    def _transact(self, data: bytes, read: Callable[[Channel, float], T], *, timeout_s: float | None) -> T:
        """Write, read, and be in step only if all of it went well."""
        with self.lock:
            channel = self._in_step()
            allowed_s = self.family.reply_timeout_s if timeout_s is None else timeout_s
            deadline_s = self.timeline.now() + allowed_s
            self.is_in_step = False
            try:
                channel.write(data, deadline_s)
                answer = read(channel, deadline_s)
            except LinkTimeoutError as late:
                self._ask_why(late, data)
                raise
            except DisconnectedError:
                self._lose()
                raise
            self.is_in_step = not self._is_lost
            return answer

    def _held(self) -> Channel:
        if self._is_lost:
            raise DisconnectedError(
                "the connection was lost and has not been opened again",
                address=self.address,
                do="look at the instrument and its cable, then resume the run",
            )
        return self._take_hold()

    def _take_hold(self) -> Channel:
        if self._channel is None:
            self._channel = self._open_channel()
            self._is_lost = self.is_in_step = False
        return self._channel

    def _in_step(self) -> Channel:
        """Return the channel once the next reply is sure to answer the next question."""
        channel = self._held()
        try:
            unread = channel.discard() if self.is_in_step else b""
        except DisconnectedError:
            self._lose()
            raise
        if unread or not self.is_in_step:
            self._discarded = self._discarded[-LONGEST_DISCARDED_BYTES:] + unread
            self.resync()
        return channel

    def _lose(self) -> None:
        self.close()
        self._is_lost = True

    def _ask_why(self, late: LinkTimeoutError, data: bytes) -> None:
        """Resync after a timeout; a complaint of the instrument explains it and is raised instead."""
        try:
            complaints = self.resync().complaints
        except DisconnectedError:
            raise
        except LinkError:
            return  # still out of step; the timeout itself is the news
        if complaints:
            code, text = complaints[0]
            more = "".join(f"; then {code} {text}" for code, text in complaints[1:])
            raise RefusedError(
                f"the instrument refused {data!r}: {code} {text}{more}",
                address=self.address,
                code=code,
                text=text,
                do="check that the driver fits this instrument and its firmware",
            ) from late

    def _block_size(self, channel: Channel, deadline_s: float) -> int:
        head = channel.read_exact(2, deadline_s)
        if head[:1] != b"#" or head[1:] not in (b"1", b"2", b"3", b"4", b"5", b"6", b"7", b"8", b"9"):
            why = "a block without a length" if head == b"#0" else "no block"
            raise self._no_reply(f"the instrument sent {why}", head)
        digits = channel.read_exact(int(head[1:]), deadline_s)
        if not digits.isdigit() or int(digits) > LONGEST_BLOCK_BYTES:
            raise self._no_reply("the length of a block is no length", head + digits)
        return int(digits)

    def _refuse_more(self, channel: Channel, answer: bytes) -> None:
        """With more than one reply here, nothing tells which of them is the answer."""
        try:
            more = channel.discard()
        except DisconnectedError:  # the answer came whole before the end: told at the next exchange
            self._lose()
            return
        if more:
            raise self._no_reply("more than one reply came to one question", answer + b"\n" + more)

    def _no_reply(self, what: str, partial: bytes) -> FramingError:
        return FramingError(
            f"{what}: {partial[:80]!r}",
            address=self.address,
            partial=partial,
            do="check that the driver fits this instrument and that nobody else talks to it",
        )


def _bare(line: bytes) -> bytes:
    """Take LF, and one CR before it, off a line."""
    return line[:-1].removesuffix(b"\r")
