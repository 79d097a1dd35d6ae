"""Exchanges a second: over the loopback in virtual time, and over TCP, a serial port and HiSLIP beside bare ones.

Printed, never asserted. The peers answer at once, so what is measured is the links' own cost.
"""

import contextlib
import os
import socket
import statistics
import sys
import threading
import time
import tty
from collections.abc import Callable
from datetime import UTC, datetime

from rigctl.links.channel import Channel
from rigctl.links.family import Opening, Resynced
from rigctl.links.hislip import HislipChannel
from rigctl.links.link import Link
from rigctl.links.loopback import LoopbackChannel
from rigctl.links.serial import SerialChannel
from rigctl.links.serve import TwinServer
from rigctl.links.tcp import TcpChannel
from rigctl.timeline import VirtualTimeline, WallTimeline

QUESTION, ANSWER = b"READ?\n", b"1.234567E-03\n"
ROUNDS, ROUND_TRIPS = 7, 3_000
ADDRESS = "tcp://10.0.0.7:5025"


class PromptTwin:
    """Has its answer ready one millisecond after the question, for as little work as possible."""

    def __init__(self) -> None:
        self._ready_s: float | None = None

    def receive(self, data: bytes, now_s: float) -> None:
        self._ready_s = now_s + 1e-3

    def next_ready_s(self) -> float | None:
        return self._ready_s

    def take(self, now_s: float) -> bytes:
        if self._ready_s is None or self._ready_s > now_s:
            return b""
        self._ready_s = None
        return ANSWER


class AtOnceTwin(PromptTwin):
    """Has its answer ready at once."""

    def receive(self, data: bytes, now_s: float) -> None:
        self._ready_s = now_s


class TrustingFamily:
    """No resync: the peers here never fall out of step."""

    name, reply_timeout_s, longest_s, opening = "bench", 10.0, 10.0, Opening()

    def resync(self, channel: Channel, deadline_s: float) -> Resynced:
        return Resynced()


def answer_all(listener: socket.socket) -> None:
    client, _ = listener.accept()
    with client:
        client.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
        while client.recv(4096):
            client.sendall(ANSWER)


def time_each(ask: Callable[[], object]) -> float:
    """Seconds of one round trip: the mean of a round."""
    began = time.perf_counter()
    for _ in range(ROUND_TRIPS):
        ask()
    return (time.perf_counter() - began) / ROUND_TRIPS


def serve_one(listener: socket.socket) -> threading.Thread:
    thread = threading.Thread(target=answer_all, args=[listener])
    thread.start()
    return thread


def loopback() -> str:
    twin, timeline = PromptTwin(), VirtualTimeline(datetime(2026, 1, 1, tzinfo=UTC))
    link = Link(ADDRESS, lambda: LoopbackChannel(ADDRESS, twin, timeline), TrustingFamily(), timeline)
    each_s = statistics.median(time_each(lambda: link.exchange(QUESTION)) for _ in range(ROUNDS))
    timeline.stop.close()
    return f"loopback: {1 / each_s:,.0f} exchanges/s, {each_s * 1e6:.1f} us each\n"


def beside(name: str, bare_name: str, channel: Channel, timeline: WallTimeline, ask_bare: Callable[[], object]) -> str:
    """A link's round trips and bare ones by turns, so that the machine's moods hit both."""
    link = Link(channel.address, lambda: channel, TrustingFamily(), timeline)
    pairs = [(time_each(lambda: link.exchange(QUESTION)), time_each(ask_bare)) for _ in range(ROUNDS)]
    link.close()
    timeline.stop.close()
    ours_us, bare_us = (statistics.median(column) * 1e6 for column in zip(*pairs, strict=True))
    ratio = statistics.median(own_s / bare_s for own_s, bare_s in pairs)
    return f"{name}: {ours_us:.1f} us a round trip; {bare_name} beside it {bare_us:.1f} us; ratio {ratio:.2f}\n"


def tcp_beside_a_bare_socket() -> str:
    with socket.create_server(("127.0.0.1", 0)) as listener, socket.create_server(("127.0.0.1", 0)) as other:
        threads = [serve_one(listener), serve_one(other)]
        timeline = WallTimeline()
        channel = TcpChannel(f"tcp://127.0.0.1:{listener.getsockname()[1]}", timeline)
        with socket.create_connection(other.getsockname()) as bare:
            bare.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)

            def ask_bare() -> None:
                bare.sendall(QUESTION)
                bare.recv(64)

            told = beside("tcp", "a bare socket", channel, timeline, ask_bare)
        for thread in threads:
            thread.join()
    return told


def answer_terminal(ours: int) -> None:
    with contextlib.suppress(OSError):  # both ends closed
        while os.read(ours, 4096):
            os.write(ours, ANSWER)


def serial_beside_a_bare_terminal() -> str:
    """Without the pace of a line: what the channel itself costs."""
    pairs = [os.openpty(), os.openpty()]
    threads = [threading.Thread(target=answer_terminal, args=[ours]) for ours, _ in pairs]
    for (_, theirs), thread in zip(pairs, threads, strict=True):
        tty.setraw(theirs)
        thread.start()
    timeline, bare = WallTimeline(), pairs[1][1]
    channel = SerialChannel(f"serial://{os.ttyname(pairs[0][1])}?baud=115200", timeline, Opening())

    def ask_bare() -> None:
        os.write(bare, QUESTION)
        os.read(bare, 64)

    told = beside("serial", "a bare terminal", channel, timeline, ask_bare)
    for _, theirs in pairs:
        os.close(theirs)  # ends the thread's read
    for thread in threads:
        thread.join()
    for ours, _ in pairs:
        os.close(ours)
    return told


def hislip_beside_a_bare_socket() -> str:
    """On our own server, in a thread of this process; the bare socket has one of its own."""
    serving, timeline = WallTimeline(), WallTimeline()
    with (
        TwinServer({"visa://TCPIP0::bench::hislip0::INSTR": AtOnceTwin()}, serving) as server,
        socket.create_server(("127.0.0.1", 0)) as listener,
    ):
        threads = [threading.Thread(target=server.serve), serve_one(listener)]
        threads[0].start()
        (address,) = server.addresses.values()
        with socket.create_connection(listener.getsockname()) as bare:
            bare.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)

            def ask_bare() -> None:
                bare.sendall(QUESTION)
                bare.recv(64)

            told = beside("hislip", "a bare socket", HislipChannel(address, timeline), timeline, ask_bare)
        serving.stop.request("done")
        for thread in threads:
            thread.join()
    serving.stop.close()
    return told


if __name__ == "__main__":
    sys.stdout.write(loopback())
    sys.stdout.write(tcp_beside_a_bare_socket())
    sys.stdout.write(serial_beside_a_bare_terminal())
    sys.stdout.write(hislip_beside_a_bare_socket())
