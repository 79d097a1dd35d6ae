"""A wire to a twin in virtual time, for tests: what is sent when, and what has come back by then."""

from collections.abc import Iterable

from rigctl.links.channel import Twin


class Wire:
    """Sends to a twin and gathers its answers; the time moves on to the last of them."""

    def __init__(self, twin: Twin, *, now_s: float = 0.0) -> None:
        self.twin = twin
        self.now_s = now_s

    def send(self, data: bytes, *, at_s: float | None = None) -> None:
        self.now_s = self.now_s if at_s is None else at_s
        self.twin.receive(data, self.now_s)

    def gather(self, *, until_s: float = float("inf")) -> bytes:
        """Return every byte that becomes readable, in order, up to an instant."""
        gathered = b""
        while (ready_s := self.twin.next_ready_s()) is not None and ready_s <= until_s:
            self.now_s = max(self.now_s, ready_s)
            gathered += self.twin.take(self.now_s)
        return gathered

    def ask(self, data: bytes, *, at_s: float | None = None) -> str:
        """Send a line and return the text that comes back, without its last line end."""
        self.send(data + b"\n", at_s=at_s)
        return self.gather().decode("ascii").replace("\r\n", "\n").removesuffix("\n")

    def ask_lines(self, data: bytes, *, at_s: float | None = None) -> list[str]:
        return self.ask(data, at_s=at_s).split("\n")


def whole(twin: Twin, data: bytes, *, at_s: float) -> bytes:
    """Answers to bytes that arrive at once."""
    wire = Wire(twin)
    wire.send(data, at_s=at_s)
    return wire.gather()


def torn(twin: Twin, data: bytes, *, at_s: float) -> bytes:
    """Answers to the same bytes when they arrive one by one."""
    wire = Wire(twin)
    for byte in _each(data):
        wire.send(byte, at_s=at_s)
    return wire.gather()


def _each(data: bytes) -> Iterable[bytes]:
    return (data[place : place + 1] for place in range(len(data)))
