"""Our HiSLIP server, met message by message."""

import contextlib
import selectors
import socket
import threading
import time
from collections.abc import Iterator

import pytest
from link_peers import CLOSE, ActingTwin, NonceFamily, Pause

from rigctl.errors import BusyError
from rigctl.links.addresses import HislipAddress, parse_address
from rigctl.links.hislip import HislipChannel
from rigctl.links.hislip_messages import FIRST_ID, SIZE, VERSION, Fatal, Kind, MessageReader, Piece
from rigctl.links.link import Link
from rigctl.links.serve import TwinServer
from rigctl.links.serve_hislip import HislipPort
from rigctl.timeline import WallTimeline

OVEN = "visa://TCPIP0::10.0.0.9::hislip0::INSTR"


class Served:
    """A served twin and the thread that serves it."""

    def __init__(self, address: str = OVEN) -> None:
        self.twin = ActingTwin()
        self.timeline = WallTimeline()
        self.server = TwinServer({address: self.twin}, self.timeline)
        self.address = self.server.addresses[address]
        self.thread = threading.Thread(target=self.server.serve)
        self.thread.start()

    def stop(self) -> None:
        self.timeline.stop.request("done")
        self.thread.join(10.0)
        self.server.close()
        self.timeline.stop.close()

    def dial(self) -> "Caller":
        place = parse_address(self.address)
        assert isinstance(place, HislipAddress)
        return Caller(socket.create_connection((place.host, place.port), timeout=10.0))


class Caller:
    """One connection to the server."""

    def __init__(self, sock: socket.socket) -> None:
        self.socket, self._reader = sock, MessageReader("caller")

    def say(self, *messages: Piece | bytes) -> None:
        for message in messages:
            self.socket.sendall(message if isinstance(message, bytes) else message.pack())

    def hear(self) -> Piece | None:
        """The next message or part of one; None: the server has closed the connection."""
        while (piece := self._reader.take()) is None:
            data = self.socket.recv(4096)
            if not data:
                return None
            self._reader.add(data)
        return piece

    def heard(self) -> Piece | None:
        """What is here by now; None: nothing."""
        self.socket.setblocking(False)
        with contextlib.suppress(BlockingIOError):
            self._reader.add(self.socket.recv(4096))
        return self._reader.take()

    def ask(self, message: Piece) -> Piece | None:
        self.say(message)
        return self.hear()

    def __enter__(self) -> "Caller":
        return self

    def __exit__(self, *_: object) -> None:
        self.socket.close()


@pytest.fixture
def served() -> Iterator[Served]:
    opened = Served()
    yield opened
    opened.stop()


HELLO = Piece(Kind.INITIALIZE, 0, VERSION << 16, b"hislip0")


@contextlib.contextmanager
def session(served: Served) -> Iterator[tuple[Caller, Caller]]:
    with served.dial() as sync, served.dial() as aside:
        welcome = sync.ask(HELLO)
        assert welcome is not None
        joined = aside.ask(Piece(Kind.ASYNC_INITIALIZE, 0, welcome.parameter & 0xFFFF))
        assert joined == Piece(Kind.ASYNC_INITIALIZE_RESPONSE)
        yield sync, aside


def data(payload: bytes, number: int = FIRST_ID, kind: Kind = Kind.DATA_END) -> Piece:
    return Piece(kind, 0, number, payload)


def test_a_session_begins_in_synchronized_mode_of_version_one(served: Served) -> None:
    with served.dial() as sync:
        welcome = sync.ask(HELLO)

    assert welcome is not None
    assert (welcome.kind, welcome.control, welcome.parameter >> 16) == (Kind.INITIALIZE_RESPONSE, 0, VERSION)


def test_an_answer_bears_the_number_of_its_question(served: Served) -> None:
    with session(served) as (sync, _):
        answers = [sync.ask(data(b"ECHO? %d\n" % number, FIRST_ID + 2 * number)) for number in range(3)]

    assert answers == [data(b"%d\n" % number, FIRST_ID + 2 * number) for number in range(3)]


def test_the_end_of_a_message_ends_its_line(served: Served) -> None:
    with session(served) as (sync, _):
        sync.say(data(b"ECHO? 1", kind=Kind.DATA))

        assert sync.ask(data(b".5", FIRST_ID + 2)) == data(b"1.5\n", FIRST_ID + 2)


def test_an_answer_in_parts_ends_with_its_line(served: Served) -> None:
    served.twin.acts.append([b"1.2", Pause(0.03), b"3\n"])
    with session(served) as (sync, _):
        parts = [sync.ask(data(b"READ?\n")), sync.hear()]

    assert parts == [data(b"1.2", kind=Kind.DATA), data(b"3\n")]


def test_each_line_is_a_message_of_its_own(served: Served) -> None:
    served.twin.acts.append([b"a\nb\n"])
    with session(served) as (sync, _):
        assert [sync.ask(data(b"READ?\n")), sync.hear()] == [data(b"a\n"), data(b"b\n")]


def test_no_message_is_longer_than_the_client_takes(served: Served) -> None:
    with session(served) as (sync, aside):
        limit = aside.ask(Piece(Kind.ASYNC_MAXIMUM_MESSAGE_SIZE, payload=SIZE.pack(4)))
        parts = [sync.ask(data(b"ECHO? 0123456789\n")), sync.hear(), sync.hear()]

    assert limit == Piece(Kind.ASYNC_MAXIMUM_MESSAGE_SIZE_RESPONSE, payload=SIZE.pack(2**20))
    assert parts == [data(b"0123", kind=Kind.DATA), data(b"4567", kind=Kind.DATA), data(b"89\n")]


def test_a_device_clear_throws_away_what_was_being_said(served: Served) -> None:
    served.twin.acts.append([Pause(0.4), b"stale\n"])
    with session(served) as (sync, aside):
        sync.say(data(b"READ?\n"))
        while not served.twin.heard:
            time.sleep(0.002)
        begun = aside.ask(Piece(Kind.ASYNC_DEVICE_CLEAR))
        sync.say(data(b"ECHO? forgotten\n"))
        time.sleep(0.45)  # while the device clears, the answer becomes ready and is thrown away
        pieces = [sync.ask(Piece(Kind.DEVICE_CLEAR_COMPLETE)), sync.ask(data(b"ECHO? fresh\n"))]

    assert begun == Piece(Kind.ASYNC_DEVICE_CLEAR_ACKNOWLEDGE)
    assert pieces == [Piece(Kind.DEVICE_CLEAR_ACKNOWLEDGE), data(b"fresh\n")]
    assert served.twin.heard == [b"READ?", b"ECHO? fresh"]


def test_an_answer_that_is_ready_when_a_clear_ends_is_thrown_away(wall: WallTimeline) -> None:
    twin = ActingTwin([b"stale\n"])
    with selectors.DefaultSelector() as selector:
        port = HislipPort(twin, wall, selector, device="hislip0")
        place = parse_address(port.address)
        assert isinstance(place, HislipAddress)
        with (
            Caller(socket.create_connection((place.host, place.port), timeout=10.0)) as sync,
            Caller(socket.create_connection((place.host, place.port), timeout=10.0)) as aside,
        ):
            for caller, message in (
                (sync, HELLO),
                (aside, Piece(Kind.ASYNC_INITIALIZE, 0, 1)),
                (aside, Piece(Kind.ASYNC_DEVICE_CLEAR)),
            ):
                caller.say(message)
                while (answer := caller.heard()) is None:
                    turn(selector)
                assert answer.kind != Kind.FATAL_ERROR
            twin.receive(b"READ?\n", wall.now())
            sync.say(Piece(Kind.DEVICE_CLEAR_COMPLETE))
            while (answer := sync.heard()) is None:
                turn(selector)
            port.pump()

            assert answer.kind == Kind.DEVICE_CLEAR_ACKNOWLEDGE
            assert sync.heard() is None
        port.close()


def turn(selector: selectors.BaseSelector) -> None:
    """One turn of a server's loop, without the pump."""
    for key, events in selector.select(0.01):
        key.data(events)


@pytest.mark.parametrize(("was_delivered", "status"), [(0, 0x10), (1, 0)])
def test_the_status_byte_says_whether_an_answer_waits(served: Served, was_delivered: int, status: int) -> None:
    query = Piece(Kind.ASYNC_STATUS_QUERY)
    with session(served) as (sync, aside):
        before = aside.ask(query)
        sync.ask(data(b"ECHO? 1\n"))
        after = aside.ask(Piece(Kind.ASYNC_STATUS_QUERY, was_delivered))
        sync.ask(Piece(Kind.DEVICE_CLEAR_COMPLETE))
        cleared = aside.ask(query)

    assert (before, after, cleared) == tuple(Piece(Kind.ASYNC_STATUS_RESPONSE, bits) for bits in (0, status, 0))


def test_a_new_question_takes_the_place_of_an_answer_that_waits(served: Served) -> None:
    with session(served) as (sync, aside):
        sync.ask(data(b"ECHO? 1\n"))
        sync.say(data(b"OUTP 0\n", FIRST_ID + 2))
        while b"OUTP 0" not in served.twin.heard:
            time.sleep(0.002)

        assert aside.ask(Piece(Kind.ASYNC_STATUS_QUERY)) == Piece(Kind.ASYNC_STATUS_RESPONSE, 0)


def test_nobody_joins_the_session_of_another(served: Served) -> None:
    with served.dial() as sync, served.dial() as stranger:
        welcome = sync.ask(HELLO)
        assert welcome is not None
        refusal = stranger.ask(Piece(Kind.ASYNC_INITIALIZE, 0, (welcome.parameter + 1) & 0xFFFF))

    assert refusal is not None
    assert (refusal.kind, refusal.control) == (Kind.FATAL_ERROR, Fatal.BAD_INITIALIZATION)


def test_a_session_is_joined_once(served: Served) -> None:
    with session(served) as (sync, _), served.dial() as second:
        refusal = second.ask(Piece(Kind.ASYNC_INITIALIZE, 0, 1))

        assert refusal is not None
        assert (refusal.kind, refusal.control) == (Kind.FATAL_ERROR, Fatal.BAD_INITIALIZATION)
        assert sync.ask(data(b"ECHO? 1\n")) == data(b"1\n")


@pytest.mark.parametrize("is_aside", [True, False])
def test_a_message_that_is_not_known_is_answered_as_such(served: Served, is_aside: bool) -> None:
    lock = Piece(4, 1, 1000)
    with session(served) as connections:
        complaint = connections[is_aside].ask(lock)
        answer = connections[0].ask(data(b"ECHO? 1\n"))

    assert complaint is not None
    assert (complaint.kind, complaint.control) == (Kind.ERROR, 1)
    assert answer == data(b"1\n")


def test_a_size_that_is_none_is_answered_as_not_known(served: Served) -> None:
    with session(served) as (_, aside):
        complaint = aside.ask(Piece(Kind.ASYNC_MAXIMUM_MESSAGE_SIZE, payload=b"\0" * 7))

    assert complaint is not None
    assert complaint.kind == Kind.ERROR


@pytest.mark.parametrize(
    ("first", "code"),
    [
        (b"GET / HTTP/1.1\r\n\r\n", Fatal.BAD_HEADER),
        (data(b"ECHO? 1\n"), Fatal.NOT_BOTH_CHANNELS),
        (Piece(Kind.INITIALIZE, 0, VERSION << 16, b"hislip9"), Fatal.BAD_INITIALIZATION),
        (Piece(Kind.ASYNC_INITIALIZE, 0, 12345), Fatal.BAD_INITIALIZATION),
    ],
)
def test_who_begins_wrongly_is_told_and_closed(served: Served, first: Piece | bytes, code: Fatal) -> None:
    with served.dial() as caller:
        caller.say(first)
        refusal, end = caller.hear(), caller.hear()

    assert refusal is not None
    assert (refusal.kind, refusal.control) == (Kind.FATAL_ERROR, code)
    assert end is None


def test_a_session_that_is_not_complete_carries_nothing(served: Served) -> None:
    with served.dial() as sync:
        sync.ask(HELLO)
        refusal = sync.ask(data(b"ECHO? 1\n"))

    assert refusal is not None
    assert (refusal.kind, refusal.control) == (Kind.FATAL_ERROR, Fatal.NOT_BOTH_CHANNELS)
    assert served.twin.heard == []


def test_a_second_session_is_refused_and_the_first_served_on(served: Served) -> None:
    with session(served) as (sync, _), served.dial() as second:
        refusal = second.ask(HELLO)

        assert refusal is not None
        assert (refusal.kind, refusal.control) == (Kind.FATAL_ERROR, Fatal.TOO_MANY_CLIENTS)
        assert sync.ask(data(b"ECHO? 1\n")) == data(b"1\n")


def test_a_second_client_is_told_that_the_instrument_is_busy(served: Served, wall: WallTimeline) -> None:
    with session(served), pytest.raises(BusyError, match="serves somebody else"):
        HislipChannel(served.address, wall)


@pytest.mark.parametrize("leaves", [0, 1])
def test_a_session_ends_with_either_of_its_connections(served: Served, leaves: int) -> None:
    with session(served) as connections:
        connections[leaves].socket.close()
        stays = connections[1 - leaves]

        assert stays.hear() is None

    with session(served) as (sync, _):
        assert sync.ask(data(b"ECHO? 2\n")) == data(b"2\n")


def test_a_twin_that_hangs_up_ends_the_session(served: Served) -> None:
    served.twin.acts.append([CLOSE])
    with session(served) as (sync, aside):
        sync.say(data(b"READ?\n"))

        assert (sync.hear(), aside.hear()) == (None, None)


@pytest.mark.parametrize("leaves", [0, 1])
def test_the_last_words_of_a_client_are_heard_whichever_connection_it_closes_first(served: Served, leaves: int) -> None:
    for number in range(20):
        with session(served) as connections:
            connections[0].say(data(b"OUTP %d\n" % number))
            connections[leaves].socket.close()
    with session(served) as (sync, _):
        sync.ask(data(b"ECHO? 1\n"))

    assert served.twin.heard == [*(b"OUTP %d" % number for number in range(20)), b"ECHO? 1"]


def test_a_reply_that_nobody_waits_for_is_lost(served: Served) -> None:
    served.twin.acts.append([Pause(0.02), b"stale\n"])
    with session(served) as (sync, _):
        sync.say(data(b"READ?\n"))
    deadline = time.monotonic() + 10.0
    while not served.twin.heard or served.twin.next_ready_s() is not None:
        assert time.monotonic() < deadline
        time.sleep(0.002)

    with session(served) as (sync, _):
        assert sync.ask(data(b"ECHO? fresh\n")) == data(b"fresh\n")


def test_a_large_answer_arrives_whole_though_its_reader_is_slow(served: Served, wall: WallTimeline) -> None:
    content = b"0123456789" * 400_000
    served.twin.acts.append([content + b"\n"])
    link = Link(served.address, lambda: HislipChannel(served.address, wall), NonceFamily(), wall)
    with contextlib.closing(link):
        link.open()
        link.is_in_step = True
        channel = link._channel
        assert channel is not None
        channel.write(b"CURVE?\n", wall.now() + 10.0)

        assert channel.read_exact(len(content), wall.now() + 10.0) == content


@pytest.mark.parametrize("address", ["visa://GPIB0::7::INSTR", "visa://TCPIP0::10.0.0.9::inst0::INSTR", OVEN])
def test_whatever_visa_reaches_is_served_as_hislip(address: str, wall: WallTimeline) -> None:
    served = Served(address)
    link = Link(served.address, lambda: HislipChannel(served.address, wall), NonceFamily(), wall)
    with contextlib.closing(link):
        assert link.exchange(b"ECHO? 1.5\n") == (b"1.5",)
    served.stop()

    assert isinstance(parse_address(served.address), HislipAddress)
