"""What only a real socket can do: stop requests, deadlines of writes, owners, dead hosts, many open files."""

import contextlib
import os
import resource
import signal
import socket
import subprocess
import sys
import threading
import time
from collections.abc import Iterator
from pathlib import Path

import pytest
from link_peers import HOLD, NonceFamily, Pause, Wire

from rigctl.errors import BusyError, DisconnectedError, LinkTimeoutError, PlanError, StopRequestedError
from rigctl.links.link import Link
from rigctl.links.tcp import TcpChannel
from rigctl.timeline import WallTimeline

FAR_S = 60.0


@pytest.fixture
def listener() -> Iterator[socket.socket]:
    """A port whose connections nobody reads."""
    with socket.create_server(("127.0.0.1", 0)) as opened:
        yield opened


@pytest.fixture
def channel(listener: socket.socket, wall: WallTimeline) -> Iterator[TcpChannel]:
    opened = TcpChannel(address_of(listener), wall)
    with contextlib.closing(opened):
        yield opened


def address_of(listener: socket.socket) -> str:
    return f"tcp://127.0.0.1:{listener.getsockname()[1]}"


def test_nobody_listening_is_told_at_the_opening(wall: WallTimeline) -> None:
    with socket.create_server(("127.0.0.1", 0)) as closed_soon:
        address = address_of(closed_soon)

    with pytest.raises(DisconnectedError, match="nobody listens") as caught:
        TcpChannel(address, wall)

    assert caught.value.address == address


def test_a_failed_opening_gives_the_address_back(wall: WallTimeline) -> None:
    with socket.create_server(("127.0.0.1", 0)) as closed_soon:
        port = closed_soon.getsockname()[1]
    with pytest.raises(DisconnectedError):
        TcpChannel(f"tcp://127.0.0.1:{port}", wall)

    with socket.create_server(("127.0.0.1", port)):
        TcpChannel(f"tcp://127.0.0.1:{port}", wall).close()


def test_a_host_without_a_name_is_told(wall: WallTimeline, monkeypatch: pytest.MonkeyPatch) -> None:
    def fail(*args: object, **kwargs: object) -> None:
        raise socket.gaierror(socket.EAI_NONAME, "Name or service not known")

    monkeypatch.setattr(socket, "getaddrinfo", fail)

    with pytest.raises(DisconnectedError, match="name is not known"):
        TcpChannel("tcp://nosuchhost.example:5025", wall)


def test_a_host_that_answers_nothing_is_a_timeout(wall: WallTimeline) -> None:
    with socket.socket() as full:
        full.bind(("127.0.0.1", 0))
        full.listen(0)
        with contextlib.ExitStack() as stack:
            for _ in range(3):  # fill the queue of those who wait to be let in
                waiting = stack.enter_context(socket.socket())
                waiting.setblocking(False)
                waiting.connect_ex(full.getsockname())

            with pytest.raises(LinkTimeoutError):
                TcpChannel(address_of(full), wall, connect_s=0.05)


def test_a_host_with_two_places_is_reached_at_the_one_that_answers(
    listener: socket.socket, wall: WallTimeline, monkeypatch: pytest.MonkeyPatch
) -> None:
    port = listener.getsockname()[1]
    found = [(socket.AF_INET, socket.SOCK_STREAM, 0, "", (host, port)) for host in ("127.0.0.2", "127.0.0.1")]
    monkeypatch.setattr(socket, "getaddrinfo", lambda *args, **kwargs: found)

    TcpChannel(f"tcp://bench.example:{port}", wall).close()


@pytest.mark.parametrize("address", ["serial:///dev/ttyUSB0", "127.0.0.1:5025"])
def test_another_kind_of_address_is_a_mistake_of_the_plan(wall: WallTimeline, address: str) -> None:
    with pytest.raises(PlanError):
        TcpChannel(address, wall)


def test_a_second_owner_in_this_process_is_refused(channel: TcpChannel, wall: WallTimeline) -> None:
    with pytest.raises(BusyError, match=f"process {os.getpid()} is using it") as caught:
        TcpChannel(channel.address, wall)

    assert caught.value.address == channel.address


def test_two_names_of_one_port_are_one_address(channel: TcpChannel, wall: WallTimeline) -> None:
    port = channel.address.rpartition(":")[2]

    with pytest.raises(BusyError):
        TcpChannel(f"TCP://127.1:{port}", wall)


def test_a_closed_channel_leaves_its_address_to_the_next(channel: TcpChannel, wall: WallTimeline) -> None:
    channel.close()
    channel.close()

    TcpChannel(channel.address, wall).close()


HOLDER = """
import sys, time
from rigctl.links.link import Link
from rigctl.links.tcp import TcpChannel
from rigctl.timeline import WallTimeline
channel = TcpChannel(sys.argv[1], WallTimeline())
print("held", flush=True)
time.sleep(60)
"""


def test_another_process_keeps_the_address_until_it_dies(
    listener: socket.socket, wall: WallTimeline, own_lock_files: Path
) -> None:
    address = address_of(listener)
    command = [sys.executable, "-c", HOLDER, address]
    environment = {**os.environ, "TMPDIR": str(own_lock_files)}
    with subprocess.Popen(command, stdout=subprocess.PIPE, env=environment) as other:
        assert other.stdout is not None
        assert other.stdout.readline() == b"held\n"

        with pytest.raises(BusyError, match=f"process {other.pid} is using it"):
            TcpChannel(address, wall)
        other.send_signal(signal.SIGKILL)
        other.wait()

    TcpChannel(address, wall).close()


def test_a_stop_request_wakes_a_blocked_read(tcp_wire: Wire) -> None:
    tcp_wire.link.exchange(b"ECHO? hello\n")
    tcp_wire.twin.acts.append([HOLD, b"late\n"])
    began = time.monotonic()
    timer = threading.Timer(0.05, tcp_wire.timeline.stop.request, ["ctrl-c"])
    timer.start()

    with pytest.raises(StopRequestedError, match="ctrl-c"):
        tcp_wire.link.exchange(b"READ?\n", timeout_s=FAR_S)

    timer.join()
    assert time.monotonic() - began < 10.0
    assert not tcp_wire.link.is_in_step


def test_after_a_stop_in_mid_question_the_safe_commands_pass_on_the_same_link(tcp_wire: Wire) -> None:
    tcp_wire.link.exchange(b"ECHO? hello\n")
    tcp_wire.twin.acts.append([b"1.2", HOLD, b"34\n"])
    timer = threading.Timer(0.03, tcp_wire.timeline.stop.request, ["ctrl-c"])
    timer.start()
    with pytest.raises(StopRequestedError):
        tcp_wire.link.exchange(b"READ?\n", timeout_s=FAR_S)
    timer.join()

    with tcp_wire.timeline.stop.masked():
        answer = tcp_wire.link.exchange(b"ECHO? closed\n")

    assert answer == (b"closed",)


def test_a_stop_request_wakes_a_connection_under_way(wall: WallTimeline) -> None:
    with socket.socket() as full, contextlib.ExitStack() as stack:
        full.bind(("127.0.0.1", 0))
        full.listen(0)
        for _ in range(3):
            waiting = stack.enter_context(socket.socket())
            waiting.setblocking(False)
            waiting.connect_ex(full.getsockname())
        timer = threading.Timer(0.03, wall.stop.request, ["ctrl-c"])
        timer.start()

        with pytest.raises(StopRequestedError):
            TcpChannel(address_of(full), wall, connect_s=FAR_S)

        timer.join()


def test_a_request_that_is_held_back_does_not_make_a_read_spin(channel: TcpChannel, wall: WallTimeline) -> None:
    wall.stop.request("ctrl-c")
    began_s = time.thread_time()

    with wall.stop.masked(), pytest.raises(LinkTimeoutError):
        channel.readline(wall.now() + 0.2)

    assert time.thread_time() - began_s < 0.1


def test_a_first_request_that_comes_while_it_is_held_back_does_not_end_the_read(tcp_wire: Wire) -> None:
    tcp_wire.link.exchange(b"ECHO? hello\n")
    tcp_wire.twin.acts.append([Pause(0.08), b"closed\n"])
    timer = threading.Timer(0.02, tcp_wire.timeline.stop.request, ["ctrl-c"])
    timer.start()

    with tcp_wire.timeline.stop.masked():
        answer = tcp_wire.link.exchange(b"READ?\n")

    timer.join()
    assert answer == (b"closed",)


def test_a_reply_in_drops_cannot_stretch_the_deadline(tcp_wire: Wire) -> None:
    tcp_wire.link.exchange(b"ECHO? hello\n")
    drops = [piece for _ in range(20) for piece in (Pause(0.02), b"1")]
    tcp_wire.twin.acts.append([*drops, HOLD, b"\n"])

    with pytest.raises(LinkTimeoutError) as caught:
        tcp_wire.link.exchange(b"READ?\n", timeout_s=0.1)

    assert set(caught.value.partial) <= {ord("1")}
    assert tcp_wire.link.exchange(b"ECHO? next\n") == (b"next",)


def test_a_write_that_nobody_reads_ends_at_its_deadline(channel: TcpChannel, wall: WallTimeline) -> None:
    with pytest.raises(LinkTimeoutError, match="takes no bytes"):
        channel.write(b"x" * 2**26, wall.now() + 0.1)


def test_a_stop_request_wakes_a_blocked_write(channel: TcpChannel, wall: WallTimeline) -> None:
    timer = threading.Timer(0.03, wall.stop.request, ["ctrl-c"])
    timer.start()

    with pytest.raises(StopRequestedError):
        channel.write(b"x" * 2**26, wall.now() + FAR_S)

    timer.join()


def test_a_write_to_a_peer_that_reset_the_connection_is_disconnected(
    listener: socket.socket, channel: TcpChannel, wall: WallTimeline
) -> None:
    peer, _ = listener.accept()
    peer.setsockopt(socket.SOL_SOCKET, socket.SO_LINGER, b"\1\0\0\0\0\0\0\0")
    peer.close()

    with pytest.raises(DisconnectedError, match="closed the connection"):
        channel.write(b"x" * 2**26, wall.now() + FAR_S)


def test_a_read_from_a_peer_that_reset_the_connection_is_disconnected(
    listener: socket.socket, channel: TcpChannel, wall: WallTimeline
) -> None:
    peer, _ = listener.accept()
    peer.setsockopt(socket.SOL_SOCKET, socket.SO_LINGER, b"\1\0\0\0\0\0\0\0")
    peer.close()

    with pytest.raises(DisconnectedError, match="closed the connection"):
        channel.readline(wall.now() + FAR_S)


def test_what_has_arrived_is_read_even_after_the_deadline(
    listener: socket.socket, channel: TcpChannel, wall: WallTimeline
) -> None:
    peer, _ = listener.accept()
    with peer:
        peer.sendall(b"1.5\n")

        assert channel.readline(wall.now() + FAR_S) == b"1.5\n"
        peer.sendall(b"2.5\n")
        assert channel.readline(wall.now() - 1.0) == b"2.5\n"


@pytest.mark.parametrize(
    ("level", "option", "value"),
    [
        (socket.IPPROTO_TCP, socket.TCP_NODELAY, 1),
        (socket.SOL_SOCKET, socket.SO_KEEPALIVE, 1),
        (socket.IPPROTO_TCP, socket.TCP_KEEPIDLE, 10),
        (socket.IPPROTO_TCP, socket.TCP_KEEPINTVL, 3),
        (socket.IPPROTO_TCP, socket.TCP_KEEPCNT, 3),
        (socket.IPPROTO_TCP, socket.TCP_USER_TIMEOUT, 20_000),
    ],
)
def test_a_dead_peer_is_noticed_by_the_system(channel: TcpChannel, level: int, option: int, value: int) -> None:
    assert channel._stream._socket.getsockopt(level, option) == value


def test_a_link_works_above_the_thousandth_open_file(wall: WallTimeline) -> None:
    soft, hard = resource.getrlimit(resource.RLIMIT_NOFILE)
    if hard != resource.RLIM_INFINITY and hard < 2048:
        pytest.skip("the system allows too few open files")
    resource.setrlimit(resource.RLIMIT_NOFILE, (max(soft, 2048), hard))
    try:
        with contextlib.ExitStack() as stack:
            for _ in range(1100):
                stack.callback(os.close, os.open(os.devnull, os.O_RDONLY))
            listener = stack.enter_context(socket.create_server(("127.0.0.1", 0)))
            channel = stack.enter_context(contextlib.closing(TcpChannel(address_of(listener), wall)))

            with pytest.raises(LinkTimeoutError):
                channel.readline(wall.now() + 0.02)
    finally:
        resource.setrlimit(resource.RLIMIT_NOFILE, (soft, hard))


def test_two_threads_on_one_link_get_each_their_own_answers(tcp_wire: Wire) -> None:
    wrong: list[str] = []

    def ask(name: str) -> None:
        for number in range(100):
            word = f"{name}-{number}".encode()
            if tcp_wire.link.exchange(b"ECHO? " + word + b"\n") != (word,):
                wrong.append(name)

    threads = [threading.Thread(target=ask, args=[name]) for name in ("mount", "shutter")]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()

    assert wrong == []


def test_an_interrupt_that_nobody_takes_leaves_the_link_out_of_step(
    listener: socket.socket, wall: WallTimeline
) -> None:
    address = address_of(listener)
    link = Link(address, lambda: TcpChannel(address, wall), NonceFamily(reply_timeout_s=0.05), wall)
    with contextlib.closing(link):
        link.open()
        link.is_in_step = True

        with pytest.raises(LinkTimeoutError):
            link.interrupt(b"x" * 2**26)

        assert not link.is_in_step


def test_an_interrupt_into_a_reset_connection_loses_it(listener: socket.socket, wall: WallTimeline) -> None:
    address = address_of(listener)
    link = Link(address, lambda: TcpChannel(address, wall), NonceFamily(), wall)
    link.open()
    peer, _ = listener.accept()
    peer.setsockopt(socket.SOL_SOCKET, socket.SO_LINGER, b"\1\0\0\0\0\0\0\0")
    peer.close()

    for words in ("closed the connection", "has not been opened again"):
        with pytest.raises(DisconnectedError, match=words):
            link.interrupt(b"x" * 2**26)
