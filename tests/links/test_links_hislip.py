"""A HiSLIP session against a server that follows a script, message by message."""

import contextlib
import socket
import threading
import time
from collections.abc import Callable, Iterator
from typing import Self

import pytest
from link_peers import ActingTwin, NonceFamily, PortPeer

from rigctl.errors import (
    BusyError,
    DisconnectedError,
    FramingError,
    LinkTimeoutError,
    PlanError,
    PolrigError,
    StopRequestedError,
)
from rigctl.links.addresses import HislipAddress
from rigctl.links.hislip import HislipChannel
from rigctl.links.hislip_messages import ANY_ID, FIRST_ID, SIZE, VERSION, Fatal, Kind, MessageReader, Piece
from rigctl.links.link import Link
from rigctl.links.serve_hislip import HislipPort
from rigctl.timeline import WallTimeline

FAR_S, SOON_S = 60.0, 0.05
SESSION = 7
WELCOME = Piece(Kind.INITIALIZE_RESPONSE, 0, VERSION << 16 | SESSION)
JOINED = Piece(Kind.ASYNC_INITIALIZE_RESPONSE)
LIMIT = Piece(Kind.ASYNC_MAXIMUM_MESSAGE_SIZE_RESPONSE, payload=SIZE.pack(2**20))


class Scripted:
    """The far end of a session, which the test plays itself."""

    def __init__(self) -> None:
        self._listener = socket.create_server(("127.0.0.1", 0))
        self._listener.settimeout(10.0)
        self.address = str(HislipAddress("127.0.0.1", "hislip0", self._listener.getsockname()[1]))
        self.ends: list[tuple[socket.socket, MessageReader]] = []

    def welcome(self, *answers: Piece) -> threading.Thread:
        """In a thread: let both connections in, and answer the three questions of a beginning."""
        thread = threading.Thread(target=self._welcome, args=[answers or (WELCOME, JOINED, LIMIT)])
        thread.start()
        return thread

    def _welcome(self, answers: tuple[Piece, ...]) -> None:
        for end, answer in zip((0, 1, 1), answers, strict=False):
            if end == len(self.ends):
                sock, _ = self._listener.accept()
                sock.settimeout(10.0)
                self.ends.append((sock, MessageReader("script")))
            self.hear(end)
            self.say(answer, end=end)

    def say(self, *messages: Piece | bytes, end: int = 0) -> None:
        for message in messages:
            self.ends[end][0].sendall(message if isinstance(message, bytes) else message.pack())

    def hear(self, end: int = 0) -> Piece:
        sock, reader = self.ends[end]
        while (piece := reader.take()) is None or not piece.is_last:
            if piece is None:
                reader.add(sock.recv(4096))
        return piece

    def acknowledge_clear(self) -> None:
        """Play a device clear to its end."""
        assert self.hear(1).kind == Kind.ASYNC_DEVICE_CLEAR
        self.say(Piece(Kind.ASYNC_DEVICE_CLEAR_ACKNOWLEDGE), end=1)
        assert self.hear().kind == Kind.DEVICE_CLEAR_COMPLETE
        self.say(Piece(Kind.DEVICE_CLEAR_ACKNOWLEDGE))

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *_: object) -> None:
        self._listener.close()
        for sock, _reader in self.ends:
            sock.close()


@pytest.fixture
def script() -> Iterator[Scripted]:
    with Scripted() as opened:
        yield opened


@pytest.fixture
def channel(script: Scripted, wall: WallTimeline) -> Iterator[HislipChannel]:
    thread = script.welcome()
    with contextlib.closing(HislipChannel(script.address, wall)) as opened:
        thread.join()
        yield opened


def answer(payload: bytes, number: int = FIRST_ID, kind: Kind = Kind.DATA_END) -> Piece:
    return Piece(kind, 0, number, payload)


def during(action: Callable[[], object], meanwhile: Callable[[], object]) -> None:
    """Do something while the far end does its part in a thread."""
    thread = threading.Thread(target=meanwhile)
    thread.start()
    action()
    thread.join()


def test_a_session_begins_as_the_standard_says(script: Scripted, wall: WallTimeline) -> None:
    heard: list[Piece] = []
    really_hear = script.hear
    script.hear = lambda end=0: heard.append(really_hear(end)) or heard[-1]  # type: ignore[method-assign,func-returns-value]
    thread = script.welcome()

    HislipChannel(script.address, wall).close()

    thread.join()
    assert [piece.kind for piece in heard] == [
        Kind.INITIALIZE,
        Kind.ASYNC_INITIALIZE,
        Kind.ASYNC_MAXIMUM_MESSAGE_SIZE,
    ]
    assert heard[0].payload == b"hislip0"
    assert heard[0].parameter >> 16 == VERSION
    assert heard[1].parameter == SESSION


def test_questions_are_numbered_by_twos(channel: HislipChannel, script: Scripted) -> None:
    for _ in range(3):
        channel.write(b"READ?\n", FAR_S)

    assert [script.hear().parameter for _ in range(3)] == [FIRST_ID, FIRST_ID + 2, FIRST_ID + 4]


def test_a_question_is_one_message_and_tells_whether_the_last_answer_was_read(
    channel: HislipChannel, script: Scripted
) -> None:
    channel.write(b"READ?\n", FAR_S)
    first = script.hear()
    script.say(answer(b"1.5\n"))
    channel.readline(FAR_S)
    channel.write(b"READ?\n", FAR_S)
    second = script.hear()

    assert first == Piece(Kind.DATA_END, 0, FIRST_ID, b"READ?\n")
    assert second == Piece(Kind.DATA_END, 1, FIRST_ID + 2, b"READ?\n")


def test_a_question_longer_than_the_device_takes_is_cut(script: Scripted, wall: WallTimeline) -> None:
    thread = script.welcome(WELCOME, JOINED, Piece(LIMIT.kind, payload=SIZE.pack(4)))
    with contextlib.closing(HislipChannel(script.address, wall)) as channel:
        thread.join()
        channel.write(b"0123456789", FAR_S)

        pieces = [script.hear() for _ in range(3)]

    assert [(piece.kind, piece.payload) for piece in pieces] == [
        (Kind.DATA, b"0123"),
        (Kind.DATA, b"4567"),
        (Kind.DATA_END, b"89"),
    ]


def test_an_answer_in_parts_is_one_line(channel: HislipChannel, script: Scripted) -> None:
    channel.write(b"READ?\n", FAR_S)
    script.say(answer(b"1.", kind=Kind.DATA), answer(b"5\n"))

    assert channel.readline(FAR_S) == b"1.5\n"


@pytest.mark.parametrize("parts", [[b"1.5"], [b"1.5", b""], [b"1", b".5"]])
def test_the_end_of_a_message_ends_its_line(channel: HislipChannel, script: Scripted, parts: list[bytes]) -> None:
    channel.write(b"READ?\n", FAR_S)
    script.say(*(answer(part, kind=Kind.DATA) for part in parts[:-1]), answer(parts[-1]))

    assert channel.readline(FAR_S) == b"1.5\n"


def test_a_line_that_ended_before_the_message_gets_no_second_end(channel: HislipChannel, script: Scripted) -> None:
    channel.write(b"READ?\n", FAR_S)
    script.say(answer(b"1.5\n", kind=Kind.DATA), answer(b""), answer(b"2.5\n"))

    assert [channel.readline(FAR_S), channel.readline(FAR_S)] == [b"1.5\n", b"2.5\n"]


def test_an_answer_to_an_older_question_is_thrown_away(channel: HislipChannel, script: Scripted) -> None:
    channel.write(b"READ?\n", FAR_S)
    channel.write(b"READ?\n", FAR_S)
    script.say(answer(b"stale\n"), answer(b"fresh\n", FIRST_ID + 2))

    assert channel.readline(FAR_S) == b"fresh\n"


def test_an_interrupted_answer_is_passed_over(channel: HislipChannel, script: Scripted) -> None:
    interrupted, aside = 13, 14
    channel.write(b"READ?\n", FAR_S)
    script.say(answer(b"sta", kind=Kind.DATA), Piece(interrupted, 0, FIRST_ID + 2))
    script.say(Piece(aside, 0, FIRST_ID + 2), end=1)
    channel.write(b"READ?\n", FAR_S)
    channel.discard()
    script.say(answer(b"fresh\n", FIRST_ID + 2))

    assert channel.readline(FAR_S) == b"fresh\n"


def test_an_answer_without_a_number_is_an_answer(channel: HislipChannel, script: Scripted) -> None:
    channel.write(b"READ?\n", FAR_S)
    script.say(answer(b"1.5\n", ANY_ID))

    assert channel.readline(FAR_S) == b"1.5\n"


def test_a_timeout_inside_a_message_keeps_what_came(
    channel: HislipChannel, script: Scripted, wall: WallTimeline
) -> None:
    channel.write(b"READ?\n", FAR_S)
    script.say(answer(b"1.2345E-03\n").pack()[:22])

    with pytest.raises(LinkTimeoutError) as caught:
        channel.readline(wall.now() + SOON_S)

    assert caught.value.partial == b"1.2345"


def test_after_a_timeout_the_device_is_cleared_before_the_next_question(
    channel: HislipChannel, script: Scripted, wall: WallTimeline
) -> None:
    channel.write(b"READ?\n", FAR_S)
    whole = answer(b"1.2345E-03\n").pack()
    script.say(whole[:22])
    with pytest.raises(LinkTimeoutError):
        channel.readline(wall.now() + SOON_S)
    script.hear()
    script.say(whole[22:])

    during(lambda: channel.write(b"AGAIN?\n", FAR_S), script.acknowledge_clear)
    question = script.hear()
    script.say(answer(b"fresh\n"))

    assert question == Piece(Kind.DATA_END, 0, FIRST_ID, b"AGAIN?\n")
    assert channel.readline(FAR_S) == b"fresh\n"


def test_a_device_that_takes_no_clear_lets_nothing_pass(
    channel: HislipChannel, script: Scripted, wall: WallTimeline
) -> None:
    channel.write(b"READ?\n", FAR_S)
    with pytest.raises(LinkTimeoutError):
        channel.readline(wall.now() + SOON_S)
    script.hear()

    for _ in range(2):
        with pytest.raises(LinkTimeoutError):
            channel.write(b"OUTP 1\n", wall.now() + SOON_S)

    assert [script.hear(1).kind, script.hear(1).kind] == [Kind.ASYNC_DEVICE_CLEAR] * 2


def test_a_stop_request_wakes_a_read_and_the_safe_commands_pass_after_a_clear(
    channel: HislipChannel, script: Scripted, wall: WallTimeline
) -> None:
    channel.write(b"READ?\n", FAR_S)
    script.hear()
    timer = threading.Timer(0.03, wall.stop.request, ["ctrl-c"])
    timer.start()
    began = time.monotonic()
    with pytest.raises(StopRequestedError):
        channel.readline(FAR_S)
    timer.join()

    with wall.stop.masked():
        during(lambda: channel.write(b"OUTP 0\n", FAR_S), script.acknowledge_clear)

    assert time.monotonic() - began < 10.0
    assert script.hear().payload == b"OUTP 0\n"


def test_a_message_that_left_in_part_is_sent_to_its_end_first(
    channel: HislipChannel, script: Scripted, wall: WallTimeline
) -> None:
    long = b"x" * 2**20 + b"\n"
    channel._sync._stream._socket.setsockopt(socket.SOL_SOCKET, socket.SO_SNDBUF, 2**14)
    script.ends[0][0].setsockopt(socket.SOL_SOCKET, socket.SO_RCVBUF, 2**14)
    with pytest.raises(LinkTimeoutError, match="takes no bytes"):
        channel.write(long, wall.now() + SOON_S)

    assert 0 < len(channel._sync._unsent) < 2**20

    def far_end() -> None:
        assert script.hear(1).kind == Kind.ASYNC_DEVICE_CLEAR
        script.say(Piece(Kind.ASYNC_DEVICE_CLEAR_ACKNOWLEDGE), end=1)
        while script.hear().kind != Kind.DEVICE_CLEAR_COMPLETE:
            pass
        script.say(Piece(Kind.DEVICE_CLEAR_ACKNOWLEDGE))

    during(lambda: channel.write(b"OUTP 0\n", FAR_S), far_end)

    assert script.hear().payload == b"OUTP 0\n"


def test_a_stop_before_the_first_byte_sends_nothing_at_all(
    channel: HislipChannel, script: Scripted, wall: WallTimeline
) -> None:
    wall.stop.request("ctrl-c")
    with pytest.raises(StopRequestedError):
        channel.write(b"OUTP 1\n", FAR_S)

    with wall.stop.masked():
        during(lambda: channel.write(b"OUTP 0\n", FAR_S), script.acknowledge_clear)

    assert script.hear().payload == b"OUTP 0\n"


@pytest.mark.parametrize(
    ("complaint", "error", "words"),
    [
        (Piece(Kind.FATAL_ERROR, 0, 0, b"overheated"), DisconnectedError, "ended the session: overheated"),
        (Piece(Kind.FATAL_ERROR, 5), DisconnectedError, "ended the session: code 5"),
        (Piece(Kind.ERROR, 4, 0, b"too large"), FramingError, "did not take a message: too large"),
        (b"+1.5E-03\n 0123456789", FramingError, "begins no message"),
    ],
)
def test_what_the_device_complains_of_is_told(
    channel: HislipChannel, script: Scripted, complaint: Piece | bytes, error: type[PolrigError], words: str
) -> None:
    channel.write(b"READ?\n", FAR_S)
    script.say(complaint)

    with pytest.raises(error, match=words):
        channel.readline(FAR_S)


def test_a_device_that_serves_somebody_else_is_busy(script: Scripted, wall: WallTimeline) -> None:
    thread = script.welcome(Piece(Kind.FATAL_ERROR, Fatal.TOO_MANY_CLIENTS))

    with pytest.raises(BusyError, match="serves somebody else"):
        HislipChannel(script.address, wall)

    thread.join()


@pytest.mark.parametrize("payload", [b"", b"\0" * 8, b"\0" * 7])
def test_a_size_of_messages_that_is_none_is_a_framing_error(
    script: Scripted, wall: WallTimeline, payload: bytes
) -> None:
    thread = script.welcome(WELCOME, JOINED, Piece(LIMIT.kind, payload=payload))

    with pytest.raises(FramingError, match="names no size"):
        HislipChannel(script.address, wall)

    thread.join()


def test_a_host_that_says_nothing_is_a_timeout_and_the_address_is_given_back(
    script: Scripted, wall: WallTimeline
) -> None:
    with pytest.raises(LinkTimeoutError):
        HislipChannel(script.address, wall, connect_s=SOON_S)

    with pytest.raises(LinkTimeoutError):
        HislipChannel(script.address, wall, connect_s=SOON_S)


def test_nobody_listening_is_told_at_the_opening(script: Scripted, wall: WallTimeline) -> None:
    with Scripted() as closed_soon:
        address = closed_soon.address

    with pytest.raises(DisconnectedError, match="nobody listens"):
        HislipChannel(address, wall)


@pytest.mark.parametrize("address", ["tcp://127.0.0.1:4880", "visa://GPIB0::7::INSTR", "hislip0"])
def test_another_kind_of_address_is_a_mistake_of_the_plan(wall: WallTimeline, address: str) -> None:
    with pytest.raises(PlanError):
        HislipChannel(address, wall)


def test_a_second_owner_is_refused(channel: HislipChannel, wall: WallTimeline) -> None:
    with pytest.raises(BusyError, match="is using it"):
        HislipChannel(channel.address, wall)


def test_a_closed_channel_leaves_its_address_to_the_next(wall: WallTimeline) -> None:
    twin = ActingTwin()
    peer = PortPeer(twin, lambda *parts: HislipPort(*parts, device="hislip0"))
    with contextlib.closing(peer):
        for _ in range(20):
            channel = HislipChannel(peer.address, wall)
            channel.close()
            channel.close()

        link = Link(peer.address, lambda: HislipChannel(peer.address, wall), NonceFamily(), wall)
        with contextlib.closing(link):
            assert link.exchange(b"ECHO? 1.5\n") == (b"1.5",)
