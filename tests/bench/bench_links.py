"""Exchanges a second: over the loopback in virtual time, and over TCP beside a bare socket in the same run.

Printed, never asserted. The peers answer at once, so what is measured is the links' own cost.
"""

import socket
import statistics
import sys
import threading
import time
from collections.abc import Callable
from datetime import UTC, datetime

from rigctl.links.channel import Channel
from rigctl.links.family import Opening, Resynced
from rigctl.links.link import Link
from rigctl.links.loopback import LoopbackChannel
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


def tcp_beside_a_bare_socket() -> str:
    with socket.create_server(("127.0.0.1", 0)) as listener, socket.create_server(("127.0.0.1", 0)) as other:
        threads = [serve_one(listener), serve_one(other)]
        timeline, address = WallTimeline(), f"tcp://127.0.0.1:{listener.getsockname()[1]}"
        link = Link(address, lambda: TcpChannel(address, timeline), TrustingFamily(), timeline)
        with socket.create_connection(other.getsockname()) as bare:
            bare.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)

            def ask_bare() -> None:
                bare.sendall(QUESTION)
                bare.recv(64)

            pairs = [(time_each(lambda: link.exchange(QUESTION)), time_each(ask_bare)) for _ in range(ROUNDS)]
        link.close()
        timeline.stop.close()
        for thread in threads:
            thread.join()
    ours_us, bare_us = (statistics.median(column) * 1e6 for column in zip(*pairs, strict=True))
    ratio = statistics.median(own_s / bare_s for own_s, bare_s in pairs)
    return f"tcp: {ours_us:.1f} us a round trip; a bare socket beside it {bare_us:.1f} us; ratio {ratio:.2f}\n"


if __name__ == "__main__":
    sys.stdout.write(loopback())
    sys.stdout.write(tcp_beside_a_bare_socket())
