"""Twins behind pseudo-terminals, as slow as the lines they stand for."""

import contextlib
import os
import threading
import time
from collections.abc import Iterator

import pytest
from hypothesis import given
from hypothesis import strategies as st
from link_peers import CLOSE, ActingTwin, NonceFamily, open_line

from rigctl.errors import DisconnectedError
from rigctl.links.addresses import SerialAddress, parse_address
from rigctl.links.link import Link
from rigctl.links.serve import TwinServer
from rigctl.links.serve_pty import PacedBytes
from rigctl.timeline import WallTimeline

BYTE_S = 0.25


@pytest.fixture
def paced() -> PacedBytes:
    return PacedBytes(BYTE_S)


def test_nothing_on_the_way_has_no_next_instant(paced: PacedBytes) -> None:
    assert paced.next_s() is None
    assert paced.take(100.0) == b""


def test_bytes_come_one_after_the_other(paced: PacedBytes) -> None:
    paced.put(b"abc", 1.0)

    came = [paced.take(instant_s) for instant_s in (1.0, 1.24, 1.25, 1.6, 1.75, 9.0)]

    assert came == [b"", b"", b"a", b"b", b"c", b""]


def test_the_next_instant_is_that_of_the_next_byte(paced: PacedBytes) -> None:
    paced.put(b"abc", 1.0)
    first_s = paced.next_s()
    paced.take(1.5)

    assert (first_s, paced.next_s()) == (1.25, 1.75)


def test_bytes_sent_later_wait_for_those_before_them(paced: PacedBytes) -> None:
    paced.put(b"ab", 0.0)
    paced.put(b"c", 0.1)

    assert [paced.take(0.5), paced.take(0.74), paced.take(0.75)] == [b"ab", b"", b"c"]


def test_a_line_that_was_idle_saves_no_time_up(paced: PacedBytes) -> None:
    paced.put(b"a", 0.0)
    paced.take(5.0)
    paced.put(b"b", 5.0)

    assert [paced.take(5.2), paced.take(5.25)] == [b"", b"b"]


def test_what_exceeds_the_buffer_is_lost(paced: PacedBytes) -> None:
    paced.put(b"x" * 2**16 + b"lost", 0.0)
    paced.put(b"lost too", 0.0)

    assert paced.take(1e9) == b"x" * 2**16


@given(
    st.lists(st.tuples(st.floats(min_value=0.0, max_value=2.0), st.binary(max_size=6)), max_size=8),
    st.lists(st.floats(min_value=0.0, max_value=40.0), max_size=12),
)
def test_no_byte_comes_early_or_out_of_order(puts: list[tuple[float, bytes]], looks_s: list[float]) -> None:
    paced, now_s, sent, came = PacedBytes(BYTE_S), 0.0, b"", b""
    for wait_s, data in puts:
        now_s += wait_s
        came += paced.take(now_s)
        paced.put(data, now_s)
        sent += data
    for look_s in sorted(looks_s):
        came += paced.take(now_s + look_s)

        assert len(came) * BYTE_S <= now_s + look_s + 1e-9

    assert sent.startswith(came)
    assert came + paced.take(1e6) == sent


class Served:
    """A twin behind a pseudo-terminal of a given speed, and the thread that serves it."""

    def __init__(self, baud: int) -> None:
        self.twin = ActingTwin()
        self.timeline = WallTimeline()
        self.line = f"serial:///dev/ttyUSB0?baud={baud}"
        self.server = TwinServer({self.line: self.twin}, self.timeline)
        self.address = self.server.addresses[self.line]
        self.thread = threading.Thread(target=self.server.serve)
        self.thread.start()

    def stop(self) -> None:
        self.timeline.stop.request("done")
        self.thread.join(10.0)
        self.server.close()
        self.timeline.stop.close()

    def link(self, wall: WallTimeline) -> contextlib.closing[Link]:
        return contextlib.closing(Link(self.address, lambda: open_line(self.address, wall), NonceFamily(), wall))


@pytest.fixture
def served() -> Iterator[Served]:
    opened = Served(115200)
    yield opened
    opened.stop()


@pytest.fixture
def slow() -> Iterator[Served]:
    opened = Served(1200)
    yield opened
    opened.stop()


def test_a_serial_twin_is_a_terminal_with_the_settings_of_its_address() -> None:
    timeline = WallTimeline()
    with TwinServer({"serial:///dev/ttyS0?baud=9600&format=7E1": ActingTwin()}, timeline) as server:
        (address,) = map(parse_address, server.addresses.values())
    timeline.stop.close()

    assert isinstance(address, SerialAddress)
    assert address.path.startswith("/dev/pts/")
    assert (address.baud, address.format) == (9600, "7E1")


def test_a_link_over_a_terminal_works_as_over_any_other(served: Served, wall: WallTimeline) -> None:
    with served.link(wall) as link:
        assert link.exchange(b"ECHO? 1.5\n") == (b"1.5",)

    assert served.twin.heard[-1] == b"ECHO? 1.5"


def test_nothing_is_echoed_or_changed_on_the_way(served: Served, wall: WallTimeline) -> None:
    with served.link(wall) as link:
        served.twin.acts.append([b"#15\x00\x03\x04\r\x11\n"])

        assert link.exchange_block(b"CURVE?\n") == b"\x00\x03\x04\r\x11"


def test_a_terminal_serves_one_client_after_the_other(served: Served, wall: WallTimeline) -> None:
    for number in range(5):
        with served.link(wall) as link:
            assert link.exchange(b"ECHO? %d\n" % number) == (b"%d" % number,)


def test_question_and_answer_take_their_time_on_a_slow_line(slow: Served, wall: WallTimeline) -> None:
    with slow.link(wall) as link:
        link.open()
        link.is_in_step = True
        began = time.monotonic()
        link.exchange(b"ECHO? 0123456789\n")
        took_s = time.monotonic() - began

    assert took_s >= (17 + 11) * 10 / 1200


def test_a_real_time_byte_reaches_the_twin_before_the_line_it_interrupts_ends(slow: Served) -> None:
    fd = os.open(slow.address.removeprefix("serial://").partition("?")[0], os.O_RDWR | os.O_NOCTTY)
    try:
        os.write(fd, b"STOP\n" + b"x" * 30)
        deadline = time.monotonic() + 10.0
        while not slow.twin.heard:
            assert time.monotonic() < deadline
            time.sleep(0.001)

        assert slow.twin.heard == [b"STOP"]
        assert len(slow.twin._line) < 30
    finally:
        os.close(fd)


def test_a_twin_that_goes_is_silent_and_does_not_end_the_serving(served: Served, wall: WallTimeline) -> None:
    served.twin.acts.append([CLOSE])
    fd = os.open(served.address.removeprefix("serial://").partition("?")[0], os.O_RDWR | os.O_NOCTTY)
    os.write(fd, b"READ?\n")
    os.close(fd)

    with served.link(wall) as link:
        assert link.exchange(b"ECHO? still here\n") == (b"still here",)


def test_a_flood_that_nobody_reads_is_lost_and_does_not_end_the_serving(wall: WallTimeline) -> None:
    fast = Served(4_000_000)
    fast.twin.acts.append([b"x" * 50_000])
    fd = os.open(fast.address.removeprefix("serial://").partition("?")[0], os.O_RDWR | os.O_NOCTTY)
    os.write(fd, b"FLOOD?\n")
    time.sleep(0.3)  # far more than its 50,000 bytes take, and more bytes than a terminal holds
    os.close(fd)

    with fast.link(wall) as link:
        assert link.exchange(b"ECHO? still here\n") == (b"still here",)
    fast.stop()


def test_closing_takes_the_terminal_away(wall: WallTimeline) -> None:
    with TwinServer({"serial:///dev/ttyUSB0?baud=115200": ActingTwin()}, wall) as server:
        (address,) = server.addresses.values()
        channel = open_line(address, wall)

    with contextlib.closing(channel), pytest.raises(DisconnectedError, match="the port is gone"):
        channel.readline(wall.now() + 10.0)
