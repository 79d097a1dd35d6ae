"""An instrument behind VXI-11, small and strict: a new question interrupts an answer that was not read.

Source: VXI-11 revision 1.0, RPC as in RFC 5531 and XDR as in RFC 4506; from memory.
"""

import contextlib
import socket
import struct
import threading
import time
from collections.abc import Callable

from link_peers import ActingTwin

from rigctl.errors import DisconnectedError
from rigctl.timeline import WallTimeline

PORT_MAPPER, GET_PORT = 100_000, 3
CREATE_LINK, WRITE, READ, CLEAR, DESTROY_LINK = 10, 11, 12, 15, 23
IO_TIMEOUT, END = 15, 4
MOST_BYTES = 1024


def opaque(data: bytes) -> bytes:
    return struct.pack("!I", len(data)) + data + b"\0" * (-len(data) % 4)


class VxiPeer:
    """A thread for each connection; the port mapper answers on the same port."""

    def __init__(self, twin: ActingTwin) -> None:
        self.twin = twin
        self.clears = 0
        self.reads = 0
        self.ends_without_line_feed = False
        self._output = b""
        self._lock = threading.Lock()
        self._timeline = WallTimeline()
        self._listener = socket.create_server(("127.0.0.1", 0))
        self.port: int = self._listener.getsockname()[1]
        self._sockets: list[socket.socket] = []
        self._threads = [threading.Thread(target=self._accept)]
        self._threads[0].start()

    def release(self) -> None:
        """Let out what is held back."""
        with self._lock:
            self.twin.release(self._timeline.now())

    def hang_up(self) -> None:
        for sock in self._sockets:
            with contextlib.suppress(OSError):
                sock.shutdown(socket.SHUT_RDWR)

    def close(self) -> None:
        self._listener.shutdown(socket.SHUT_RDWR)
        self.hang_up()
        for thread in self._threads:
            thread.join()
        self._listener.close()
        self._timeline.stop.close()

    def _accept(self) -> None:
        with contextlib.suppress(OSError):
            while True:
                sock, _ = self._listener.accept()
                self._sockets.append(sock)
                self._threads.append(threading.Thread(target=self._serve, args=[sock]))
                self._threads[-1].start()

    def _serve(self, sock: socket.socket) -> None:
        with sock, sock.makefile("rb") as calls, contextlib.suppress(OSError, DisconnectedError, struct.error):
            while True:
                (mark,) = struct.unpack("!I", calls.read(4))
                call = calls.read(mark & 0x7FFF_FFFF)
                number, _, _, program, _, procedure = struct.unpack("!6I", call[:24])
                answer = struct.pack("!6I", number, 1, 0, 0, 0, 0) + self._do(program, procedure, call[40:])
                sock.sendall(struct.pack("!I", 0x8000_0000 | len(answer)) + answer)

    def _do(self, program: int, procedure: int, arguments: bytes) -> bytes:
        if program == PORT_MAPPER:
            return struct.pack("!I", self.port if procedure == GET_PORT else 0)
        does: dict[int, Callable[[bytes], bytes]] = {
            CREATE_LINK: lambda _: struct.pack("!4I", 0, 1, 0, MOST_BYTES),
            DESTROY_LINK: lambda _: struct.pack("!I", 0),
            CLEAR: self._clear,
            WRITE: self._write,
            READ: self._read,
        }
        return does[procedure](arguments)

    def _clear(self, _arguments: bytes) -> bytes:
        with self._lock:
            self.clears += 1
            self._output = b""
            self.twin.take(self._timeline.now())
        return struct.pack("!I", 0)

    def _write(self, arguments: bytes) -> bytes:
        (count,) = struct.unpack("!I", arguments[16:20])
        with self._lock:
            self._fetch()
            self._output = b""
            self.twin.receive(arguments[20 : 20 + count], self._timeline.now())
        return struct.pack("!2I", 0, count)

    def _read(self, arguments: bytes) -> bytes:
        _, most, timeout_ms = struct.unpack("!3I", arguments[:12])
        self.reads += 1
        until = time.monotonic() + timeout_ms * 1e-3
        while True:
            with self._lock:
                self._fetch()
                line, end, _ = self._output.partition(b"\n")
                data = (line + end)[:most]
                self._output = self._output[len(data) :]
            if data and self.ends_without_line_feed:
                return struct.pack("!2I", 0, END) + opaque(data.removesuffix(b"\n"))
            if data:
                return struct.pack("!2I", 0, END if data.endswith(b"\n") else 0) + opaque(data)
            if time.monotonic() >= until:
                return struct.pack("!2I", IO_TIMEOUT, 0) + opaque(b"")
            time.sleep(0.001)

    def _fetch(self) -> None:
        self._output += self.twin.take(self._timeline.now())
