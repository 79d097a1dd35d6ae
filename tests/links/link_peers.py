"""Peers that misbehave on purpose, the same over a real socket and over the loopback, and a family to match.

An act is what the peer does about one question: pieces of bytes, `HOLD` (what follows leaves only when more
bytes arrive, or when the test lets it), `CLOSE`, `DEAF`, a pause, or a complaint for the error queue.
"""

import contextlib
import os
import random
import select
import socket
import tempfile
import threading
import tty
from collections import deque
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, field
from datetime import UTC, datetime
from enum import Enum
from pathlib import Path
from selectors import BaseSelector, DefaultSelector

from rigctl.errors import DisconnectedError
from rigctl.links.channel import Channel
from rigctl.links.family import Opening, Resynced
from rigctl.links.hislip import HislipChannel
from rigctl.links.link import Link
from rigctl.links.loopback import LoopbackChannel
from rigctl.links.serial import SerialChannel
from rigctl.links.serve import Port
from rigctl.links.serve_hislip import HislipPort
from rigctl.links.tcp import TcpChannel
from rigctl.timeline import Timeline, VirtualTimeline, WallTimeline

START = datetime(2026, 3, 1, 12, 0, tzinfo=UTC)


class Deed(Enum):
    HOLD = "hold the rest back"
    CLOSE = "close the connection"
    DEAF = "answer nothing from now on"


HOLD, CLOSE, DEAF = Deed.HOLD, Deed.CLOSE, Deed.DEAF


@dataclass(frozen=True)
class Pause:
    s: float


@dataclass(frozen=True)
class Complaint:
    code: int
    text: str


Piece = bytes | Deed | Pause | Complaint
Act = Sequence[Piece]


class ActingTwin:
    """Echoes `ECHO? x` as `x`, knows `*ESE` and the error queue, and otherwise plays its acts in order."""

    def __init__(self, *acts: Act) -> None:
        self.acts = deque(acts)
        self.heard: list[bytes] = []
        self.errors: deque[Complaint] = deque()
        self._line = bytearray()
        self._held: list[Piece] = []
        self._queue: deque[tuple[float, bytes | Deed]] = deque()
        self._ese = 0
        self._is_deaf = False

    def receive(self, data: bytes, now_s: float) -> None:
        self.release(now_s)
        self._line += data
        while b"\n" in self._line:
            line, _, rest = bytes(self._line).partition(b"\n")
            self._line = bytearray(rest)
            self._obey(line, now_s)

    def release(self, now_s: float) -> None:
        held, self._held = self._held, []
        self._play(held, now_s)

    def next_ready_s(self) -> float | None:
        return self._queue[0][0] if self._queue else None

    def take(self, now_s: float) -> bytes:
        taken = b""
        while self._queue and self._queue[0][0] <= now_s:
            _, piece = self._queue[0]
            if isinstance(piece, bytes):
                taken += piece
            elif taken:
                break
            self._queue.popleft()
            if not isinstance(piece, bytes):
                raise DisconnectedError("the twin closed the connection", address="twin")
        return taken

    def _obey(self, line: bytes, now_s: float) -> None:
        if line:
            self.heard.append(line)
        if self._is_deaf:
            return
        if line.startswith(b"*ESE"):
            self._event_status_enable(line, now_s)
        elif line == b"SYST:ERR?":
            error = self.errors.popleft() if self.errors else Complaint(0, "No error")
            self._play([f'{error.code},"{error.text}"\n'.encode()], now_s)
        elif self.acts and line.endswith(b"?"):
            self._play(self.acts.popleft(), now_s)
        elif line.startswith(b"ECHO? "):
            self._play([line[6:] + b"\n"], now_s)

    def _event_status_enable(self, line: bytes, now_s: float) -> None:
        for part in line.split(b";"):
            if part == b"*ESE?":
                self._play([b"%d\n" % self._ese], now_s)
            else:
                self._ese = int(part[5:])

    def _play(self, act: Act, now_s: float) -> None:
        at_s = now_s
        for index, piece in enumerate(act):
            if piece is HOLD:
                self._held = list(act[index + 1 :])
                return
            if piece is DEAF:
                self._is_deaf = True
            elif isinstance(piece, Pause):
                at_s += piece.s
            elif isinstance(piece, Complaint):
                self.errors.append(piece)
            else:
                self._queue.append((at_s, piece))


@dataclass(slots=True)
class NonceFamily:
    """Resync by two nonces that no older reply can hold, then the error queue emptied."""

    name: str = "test SCPI"
    reply_timeout_s: float = 10.0
    longest_s: float = 10.0
    opening: Opening = field(default_factory=Opening)
    nonces: random.Random = field(default_factory=lambda: random.Random(1))

    def resync(self, channel: Channel, deadline_s: float) -> Resynced:
        a, b = self.nonces.sample(range(1, 256), 2)
        stale = [channel.discard()]
        channel.write(b"\n*ESE %d;*ESE?\n*ESE %d;*ESE?\n" % (a, b), deadline_s)
        last = b""
        while (line := channel.readline(deadline_s)) != b"%d\n" % b or last != b"%d\n" % a:
            stale.append(last)
            last = line
        channel.write(b"*ESE 0\n", deadline_s)
        return Resynced(tuple(filter(None, stale)), tuple(self._complaints(channel, deadline_s)))

    def _complaints(self, channel: Channel, deadline_s: float) -> Iterator[tuple[int, str]]:
        while True:
            channel.write(b"SYST:ERR?\n", deadline_s)
            code, _, text = channel.readline(deadline_s).decode().strip().partition(",")
            if int(code) == 0:
                return
            yield int(code), text.strip('"')


class PeerServer:
    """A thread that lends a twin a real port; a client that comes back is served again."""

    def __init__(self, twin: ActingTwin) -> None:
        self._twin = twin
        self._listener = socket.create_server(("127.0.0.1", 0))
        self.port: int = self._listener.getsockname()[1]
        self._is_over = threading.Event()
        self._wishes: deque[threading.Event] = deque()
        self._timeline = WallTimeline()
        self._thread = threading.Thread(target=self._run)
        self._thread.start()

    def release(self) -> None:
        """Let out what is held back; returns when it has been sent."""
        sent = threading.Event()
        self._wishes.append(sent)
        assert sent.wait(10.0)

    def close(self) -> None:
        self._is_over.set()
        self._thread.join()
        self._listener.close()
        self._timeline.stop.close()

    def _run(self) -> None:
        self._listener.settimeout(0.005)
        while not self._is_over.is_set():
            with contextlib.suppress(TimeoutError, OSError, DisconnectedError):
                client, _ = self._listener.accept()
                with client:
                    client.settimeout(0.002)
                    client.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
                    self._serve(client)

    def _serve(self, client: socket.socket) -> None:
        while not self._is_over.is_set():
            with contextlib.suppress(TimeoutError):
                data = client.recv(4096)
                if not data:
                    return
                self._twin.receive(data, self._timeline.now())
            wish = self._wishes.popleft() if self._wishes else None
            if wish is not None:
                self._twin.release(self._timeline.now())
            while (ready_s := self._twin.next_ready_s()) is not None and ready_s <= self._timeline.now():
                client.sendall(self._twin.take(self._timeline.now()))
            if wish is not None:
                wish.set()


class PtyPeer:
    """A thread that lends a twin a pseudo-terminal; one that was pulled out comes back as another, of one name."""

    def __init__(self, twin: ActingTwin, name: Path) -> None:
        self._twin, self.name = twin, name
        self._is_over = threading.Event()
        self._wishes: deque[threading.Event] = deque()
        self._timeline = WallTimeline()
        self._plug_in()
        self._thread = threading.Thread(target=self._run)
        self._thread.start()

    def release(self) -> None:
        """Let out what is held back; returns when it has been sent."""
        sent = threading.Event()
        self._wishes.append(sent)
        assert sent.wait(10.0)

    def close(self) -> None:
        self._is_over.set()
        self._thread.join()
        self._pull_out(self._ours, self._theirs)
        self._timeline.stop.close()

    def _plug_in(self) -> None:
        self._ours, self._theirs = os.openpty()
        tty.setraw(self._theirs)
        os.set_blocking(self._ours, False)
        self.name.unlink(missing_ok=True)
        self.name.symlink_to(os.ttyname(self._theirs))

    def _pull_out(self, *ends: int) -> None:
        for end in ends:
            os.close(end)

    def _run(self) -> None:
        while not self._is_over.is_set():
            try:
                self._serve()
            except DisconnectedError:
                before = self._ours, self._theirs
                self._plug_in()  # while the old one is still there, so that the new one gets another number
                self._pull_out(*before)

    def _serve(self) -> None:
        readable, _, _ = select.select([self._ours], [], [], 0.002)
        if readable:
            self._twin.receive(os.read(self._ours, 4096), self._timeline.now())
        wish = self._wishes.popleft() if self._wishes else None
        if wish is not None:
            self._twin.release(self._timeline.now())
        while (ready_s := self._twin.next_ready_s()) is not None and ready_s <= self._timeline.now():
            self._send(self._twin.take(self._timeline.now()))
        if wish is not None:
            wish.set()

    def _send(self, data: bytes) -> None:
        while data:
            _, writable, _ = select.select([], [self._ours], [], 5.0)
            if not writable:
                return  # nobody reads
            data = data[os.write(self._ours, data) :]


class PortPeer:
    """A thread that serves a twin on a port of the product's own, and can let out what the twin holds back."""

    def __init__(self, twin: ActingTwin, make_port: Callable[[ActingTwin, Timeline, BaseSelector], Port]) -> None:
        self._twin = twin
        self._is_over = threading.Event()
        self._wishes: deque[threading.Event] = deque()
        self._timeline, self._selector = WallTimeline(), DefaultSelector()
        self._port = make_port(twin, self._timeline, self._selector)
        self.address = self._port.address
        self._thread = threading.Thread(target=self._run)
        self._thread.start()

    def release(self) -> None:
        """Let out what is held back; returns when it has been sent."""
        sent = threading.Event()
        self._wishes.append(sent)
        assert sent.wait(10.0)

    def close(self) -> None:
        self._is_over.set()
        self._thread.join()
        self._port.close()
        self._selector.close()
        self._timeline.stop.close()

    def _run(self) -> None:
        while not self._is_over.is_set():
            for key, events in self._selector.select(0.002):
                key.data(events)
            wish = self._wishes.popleft() if self._wishes else None
            if wish is not None:
                self._twin.release(self._timeline.now())
            self._port.pump()
            if wish is not None:
                wish.set()


@dataclass(slots=True)
class Wire:
    """A twin, the way to it, and a link on it."""

    twin: ActingTwin
    timeline: Timeline
    address: str
    open_channel: Callable[[], Channel]
    release: Callable[[], None]
    family: NonceFamily
    link: Link


@contextlib.contextmanager
def open_loopback_wire() -> Iterator[Wire]:
    twin, timeline, address = ActingTwin(), VirtualTimeline(START), "tcp://10.0.0.7:5025"

    def open_channel() -> Channel:
        return LoopbackChannel(address, twin, timeline)

    family = NonceFamily()
    link = Link(address, open_channel, family, timeline)
    yield Wire(twin, timeline, address, open_channel, lambda: twin.release(timeline.now()), family, link)
    link.close()
    timeline.stop.close()


@contextlib.contextmanager
def open_tcp_wire() -> Iterator[Wire]:
    twin = ActingTwin()
    server = PeerServer(twin)
    address = f"tcp://127.0.0.1:{server.port}"
    with contextlib.closing(server), _wired(twin, address, TcpChannel, server.release) as wire:
        yield wire


@contextlib.contextmanager
def open_serial_wire() -> Iterator[Wire]:
    twin = ActingTwin()
    peer = PtyPeer(twin, Path(tempfile.mkdtemp()) / "mount")
    address = f"serial://{peer.name}?baud=115200"
    with contextlib.closing(peer), _wired(twin, address, open_line, peer.release) as wire:
        yield wire


def open_line(address: str, timeline: Timeline) -> Channel:
    return SerialChannel(address, timeline, Opening())


@contextlib.contextmanager
def open_hislip_wire() -> Iterator[Wire]:
    twin = ActingTwin()
    peer = PortPeer(twin, lambda *parts: HislipPort(*parts, device="hislip0"))
    with contextlib.closing(peer), _wired(twin, peer.address, HislipChannel, peer.release) as wire:
        yield wire


@contextlib.contextmanager
def _wired(
    twin: ActingTwin, address: str, open_at: Callable[[str, Timeline], Channel], release: Callable[[], None]
) -> Iterator[Wire]:
    timeline, family = WallTimeline(), NonceFamily()

    def open_channel() -> Channel:
        return open_at(address, timeline)

    link = Link(address, open_channel, family, timeline)
    try:
        yield Wire(twin, timeline, address, open_channel, release, family, link)
    finally:
        link.close()
        timeline.stop.close()
