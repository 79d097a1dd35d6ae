"""Twins on real ports, met by real sockets."""

import contextlib
import socket
import threading
import time
from collections.abc import Iterator

import pytest
from link_peers import CLOSE, ActingTwin, NonceFamily, Pause

from rigctl.errors import DisconnectedError
from rigctl.links.addresses import TcpAddress, parse_address
from rigctl.links.link import Link
from rigctl.links.serve import TwinServer
from rigctl.links.tcp import TcpChannel
from rigctl.timeline import WallTimeline

METER, SWITCH = "tcp://10.0.0.7:5025", "tcp://10.0.0.8:5025"


def place_of(server: TwinServer, address: str) -> tuple[str, int]:
    found = parse_address(server.addresses[address])
    assert isinstance(found, TcpAddress)
    return found.host, found.port


def dial_to(server: TwinServer, address: str) -> socket.socket:
    return socket.create_connection(place_of(server, address), timeout=10.0)


class Served:
    """Two served twins and the thread that serves them."""

    def __init__(self) -> None:
        self.meter, self.switch = ActingTwin(), ActingTwin()
        self.timeline = WallTimeline()
        self.server = TwinServer({METER: self.meter, SWITCH: self.switch}, self.timeline)
        self.thread = threading.Thread(target=self.server.serve)
        self.thread.start()

    def dial(self, address: str = METER) -> socket.socket:
        return dial_to(self.server, address)

    def stop(self) -> None:
        self.timeline.stop.request("done")
        self.thread.join(10.0)


@pytest.fixture
def served() -> Iterator[Served]:
    opened = Served()
    yield opened
    opened.stop()
    opened.server.close()
    opened.timeline.stop.close()


def ask(client: socket.socket, question: bytes) -> bytes:
    client.sendall(question)
    with client.makefile("rb") as lines:
        return lines.readline()


def test_each_twin_has_a_port_of_its_own_on_this_computer_only(served: Served) -> None:
    places = [place_of(served.server, address) for address in (METER, SWITCH)]

    assert {host for host, _ in places} == {"127.0.0.1"}
    assert len({port for _, port in places}) == 2


def test_a_twin_answers_over_its_port(served: Served) -> None:
    with served.dial(METER) as meter, served.dial(SWITCH) as switch:
        answers = (ask(meter, b"ECHO? 1.5\n"), ask(switch, b"ECHO? 1\n"))

    assert answers == (b"1.5\n", b"1\n")
    assert served.meter.heard == [b"ECHO? 1.5"]


def test_a_reply_leaves_at_its_own_instant(served: Served) -> None:
    served.meter.acts.append([Pause(0.05), b"1.5\n"])
    began = time.monotonic()

    with served.dial() as client:
        assert ask(client, b"READ?\n") == b"1.5\n"

    assert time.monotonic() - began >= 0.05


def test_a_slow_twin_does_not_hold_the_others_up(served: Served) -> None:
    served.meter.acts.append([Pause(60.0), b"1.5\n"])
    with served.dial(METER) as meter, served.dial(SWITCH) as switch:
        meter.sendall(b"READ?\n")

        assert ask(switch, b"ECHO? 1\n") == b"1\n"


def test_a_link_over_the_port_works_as_over_any_other(served: Served, wall: WallTimeline) -> None:
    address = served.server.addresses[METER]
    link = Link(address, lambda: TcpChannel(address, wall), NonceFamily(), wall)
    with contextlib.closing(link):
        assert link.exchange(b"ECHO? 1.5\n") == (b"1.5",)


def test_a_second_client_is_closed_at_once_and_the_first_served_on(served: Served) -> None:
    with served.dial() as first, served.dial() as second:
        assert ask(first, b"ECHO? 1\n") == b"1\n"

        assert second.recv(10) == b""
        assert ask(first, b"ECHO? 2\n") == b"2\n"


def test_a_client_that_leaves_makes_room_for_the_next(served: Served) -> None:
    for number in range(20):
        with served.dial() as client:
            word = b"%d\n" % number
            assert ask(client, b"ECHO? " + word) == word


def test_a_client_that_leaves_while_the_next_one_dials_is_no_second_client(served: Served) -> None:
    may_go_on = threading.Event()
    obey = served.meter.receive

    def obey_slowly(data: bytes, now_s: float) -> None:
        assert may_go_on.wait(10.0)
        obey(data, now_s)

    served.meter.receive = obey_slowly  # type: ignore[method-assign] # holds the server up inside one call
    first = served.dial()
    first.sendall(b"OUTP 0\n")
    with served.dial() as second:
        first.close()
        may_go_on.set()

        assert ask(second, b"ECHO? 1\n") == b"1\n"


def test_the_last_words_of_a_client_are_heard(served: Served) -> None:
    with served.dial() as client:
        client.sendall(b"OUTP 0\n")
    with served.dial() as client:
        ask(client, b"ECHO? 1\n")

    assert served.meter.heard == [b"OUTP 0", b"ECHO? 1"]


def test_a_reply_that_nobody_waits_for_is_lost(served: Served) -> None:
    served.meter.acts.append([Pause(0.02), b"stale\n"])
    with served.dial() as client:
        client.sendall(b"READ?\n")
    deadline = time.monotonic() + 10.0
    while not served.meter.heard or served.meter.next_ready_s() is not None:
        assert time.monotonic() < deadline
        time.sleep(0.002)

    with served.dial() as client:
        assert ask(client, b"ECHO? fresh\n") == b"fresh\n"


def test_a_client_that_resets_its_connection_does_no_harm(served: Served) -> None:
    with served.dial() as client:
        ask(client, b"ECHO? 1\n")
        client.setsockopt(socket.SOL_SOCKET, socket.SO_LINGER, b"\1\0\0\0\0\0\0\0")

    with served.dial() as client:
        assert ask(client, b"ECHO? 2\n") == b"2\n"


def test_a_reply_larger_than_the_sockets_arrives_whole(served: Served) -> None:
    content = b"0123456789" * 800_000
    served.meter.acts.append([content[:4_000_000], content[4_000_000:], b"\n"])

    with served.dial() as client:
        assert ask(client, b"CURVE?\n") == content + b"\n"


class Flood(ActingTwin):
    """Has another megabyte ready whenever it is asked, once it has been told to begin."""

    megabytes = 0

    def next_ready_s(self) -> float | None:
        return 0.0 if self.heard else None

    def take(self, now_s: float) -> bytes:
        self.megabytes += 1
        return b"x" * 1_000_000


def test_a_client_that_reads_nothing_is_not_asked_for_more(wall: WallTimeline) -> None:
    flood, other = Flood(), ActingTwin()
    with TwinServer({METER: flood, SWITCH: other}, wall) as server:
        thread = threading.Thread(target=server.serve)
        thread.start()
        with dial_to(server, METER) as lazy, dial_to(server, SWITCH) as client:
            lazy.sendall(b"BEGIN\n")
            until = time.monotonic() + 0.2
            while time.monotonic() < until:
                assert ask(client, b"ECHO? 1\n") == b"1\n"
            lazy.sendall(b"MORE\n")

            assert ask(client, b"ECHO? 2\n") == b"2\n"
            megabytes, heard = flood.megabytes, list(flood.heard)
        wall.stop.request("done")
        thread.join(10.0)

    assert megabytes < 64  # what the system's own buffers take, and one or two more
    assert heard == [b"BEGIN"]


def test_a_twin_that_hangs_up_closes_its_client(served: Served) -> None:
    served.meter.acts.append([CLOSE])
    with served.dial() as client:
        client.sendall(b"READ?\n")
        assert client.recv(10) == b""

    with served.dial() as client:
        assert ask(client, b"ECHO? back\n") == b"back\n"


def test_a_stop_request_ends_the_serving(served: Served) -> None:
    with served.dial() as client:
        ask(client, b"ECHO? 1\n")

        served.timeline.stop.request("ctrl-c")
        served.thread.join(10.0)

    assert not served.thread.is_alive()


def test_closing_ends_the_clients_and_the_ports(wall: WallTimeline) -> None:
    with TwinServer({METER: ActingTwin()}, wall) as server:
        address = server.addresses[METER]

    with pytest.raises(DisconnectedError, match="nobody listens"):
        TcpChannel(address, wall)
