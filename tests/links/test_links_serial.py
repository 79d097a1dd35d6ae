"""What only a serial port can do: owners, settings, modem lines, boots, unplugging."""

import contextlib
import fcntl
import os
import subprocess
import sys
import termios
import threading
import time
import tty
from collections.abc import Callable, Iterator
from pathlib import Path

import pytest
import serial
from link_peers import CLOSE, HOLD, ActingTwin, NonceFamily, Pause, PtyPeer, Wire, open_line

from rigctl.errors import BusyError, DisconnectedError, LinkTimeoutError, PlanError, StopRequestedError
from rigctl.links.family import Opening
from rigctl.links.link import Link
from rigctl.links.serial import SerialChannel
from rigctl.timeline import WallTimeline

FAR_S = 60.0


class Terminal:
    """A pseudo-terminal whose near end the test holds itself."""

    def __init__(self) -> None:
        self.ours, self.theirs = os.openpty()
        tty.setraw(self.theirs)
        self.path = os.ttyname(self.theirs)
        self.address = f"serial://{self.path}?baud=9600"

    def unplug(self) -> None:
        for fd in (self.ours, self.theirs):
            with contextlib.suppress(OSError):
                os.close(fd)
        self.ours = self.theirs = -1


@pytest.fixture
def terminal() -> Iterator[Terminal]:
    opened = Terminal()
    yield opened
    opened.unplug()


@pytest.fixture
def channel(terminal: Terminal, wall: WallTimeline) -> Iterator[SerialChannel]:
    with contextlib.closing(SerialChannel(terminal.address, wall, Opening())) as opened:
        yield opened


def settings_of(terminal: Terminal) -> tuple[int, int]:
    """The control flags and the speed of the line."""
    attributes = termios.tcgetattr(terminal.theirs)
    return attributes[2], attributes[5]


@pytest.mark.parametrize(
    ("query", "flags", "speed"),
    [
        ("baud=9600", termios.CS8, termios.B9600),
        ("baud=115200", termios.CS8, termios.B115200),
        ("baud=9600&format=7E1", termios.CS7 | termios.PARENB, termios.B9600),
        ("baud=9600&format=8O2", termios.CS8 | termios.PARENB | termios.PARODD | termios.CSTOPB, termios.B9600),
    ],
)
def test_the_line_is_set_as_the_address_says(
    terminal: Terminal, wall: WallTimeline, query: str, flags: int, speed: int
) -> None:
    wanted = termios.CSIZE | termios.PARENB | termios.PARODD | termios.CSTOPB
    with contextlib.closing(SerialChannel(f"serial://{terminal.path}?{query}", wall, Opening())):
        found, found_speed = settings_of(terminal)

    # a pseudo-terminal keeps eight bits and no parity whatever it is told, but not the other settings
    assert found & wanted & ~(termios.CSIZE | termios.PARENB) == flags & ~(termios.CSIZE | termios.PARENB)
    assert found_speed == speed


@pytest.mark.parametrize("asserts", [True, False])
def test_dtr_and_rts_are_set_before_the_port_opens(
    terminal: Terminal, wall: WallTimeline, asserts: bool, monkeypatch: pytest.MonkeyPatch
) -> None:
    at_opening: list[tuple[bool, bool, bool]] = []
    really_open = serial.Serial.open

    def spy(port: serial.Serial) -> None:
        at_opening.append((bool(port.dtr), bool(port.rts), bool(port.exclusive)))
        really_open(port)

    monkeypatch.setattr(serial.Serial, "open", spy)
    SerialChannel(terminal.address, wall, Opening(asserts_dtr=asserts)).close()

    assert at_opening == [(asserts, asserts, True)]


def test_what_a_board_says_while_it_boots_is_thrown_away(terminal: Terminal, wall: WallTimeline) -> None:
    timer = threading.Timer(0.03, os.write, [terminal.ours, b"\r\nfirmware 1.1 ['$' for help]\r\n"])
    timer.start()
    began_s = wall.now()

    with contextlib.closing(SerialChannel(terminal.address, wall, Opening(quiet_s=0.15))) as channel:
        waited_s = wall.now() - began_s
        os.write(terminal.ours, b"<Idle>\n")

        assert channel.readline(wall.now() + FAR_S) == b"<Idle>\n"

    timer.join()
    assert waited_s >= 0.15


def test_a_stop_request_ends_the_wait_for_a_boot_and_gives_the_port_back(
    terminal: Terminal, wall: WallTimeline
) -> None:
    timer = threading.Timer(0.03, wall.stop.request, ["ctrl-c"])
    timer.start()

    with pytest.raises(StopRequestedError):
        SerialChannel(terminal.address, wall, Opening(quiet_s=FAR_S))

    timer.join()
    with wall.stop.masked():
        SerialChannel(terminal.address, wall, Opening()).close()


def test_no_such_port_says_what_to_do(wall: WallTimeline, tmp_path: Path) -> None:
    address = f"serial://{tmp_path}/ttyUSB0?baud=9600"

    with pytest.raises(DisconnectedError, match="no such port") as caught:
        SerialChannel(address, wall, Opening())

    assert caught.value.address == address
    assert "plug" in str(caught.value)


def test_what_is_no_serial_port_is_told_in_our_own_words(wall: WallTimeline, tmp_path: Path) -> None:
    (tmp_path / "notes").write_text("not a port")

    with pytest.raises(DisconnectedError, match="connection failed"):
        SerialChannel(f"serial://{tmp_path}/notes?baud=9600", wall, Opening())


@pytest.mark.parametrize("address", ["tcp://127.0.0.1:5025", "/dev/ttyUSB0"])
def test_another_kind_of_address_is_a_mistake_of_the_plan(wall: WallTimeline, address: str) -> None:
    with pytest.raises(PlanError):
        SerialChannel(address, wall, Opening())


def test_a_second_owner_in_this_process_is_refused(
    channel: SerialChannel, wall: WallTimeline, terminal: Terminal
) -> None:
    with pytest.raises(BusyError, match=f"process {os.getpid()} is using it"):
        SerialChannel(terminal.address, wall, Opening())


def test_two_names_of_one_port_are_one_address(
    channel: SerialChannel, wall: WallTimeline, terminal: Terminal, tmp_path: Path
) -> None:
    (tmp_path / "by-id").symlink_to(terminal.path)

    with pytest.raises(BusyError, match="is using it"):
        SerialChannel(f"serial://{tmp_path}/by-id?baud=115200", wall, Opening())


def test_a_program_that_locked_the_port_keeps_it(terminal: Terminal, wall: WallTimeline) -> None:
    fd = os.open(terminal.path, os.O_RDWR | os.O_NOCTTY)
    try:
        fcntl.flock(fd, fcntl.LOCK_EX)

        with pytest.raises(BusyError, match="another program has this port open"):
            SerialChannel(terminal.address, wall, Opening())
    finally:
        os.close(fd)

    SerialChannel(terminal.address, wall, Opening()).close()


HOLDER = """
import sys, time
from rigctl.links.family import Opening
from rigctl.links.serial import SerialChannel
from rigctl.timeline import WallTimeline
channel = SerialChannel(sys.argv[1], WallTimeline(), Opening())
print("held", flush=True)
time.sleep(60)
"""


def test_another_process_keeps_the_port_until_it_dies(
    terminal: Terminal, wall: WallTimeline, own_lock_files: Path
) -> None:
    environment = {**os.environ, "TMPDIR": str(own_lock_files)}
    command = [sys.executable, "-c", HOLDER, terminal.address]
    with subprocess.Popen(command, stdout=subprocess.PIPE, env=environment) as other:
        assert other.stdout is not None
        assert other.stdout.readline() == b"held\n"

        with pytest.raises(BusyError, match=f"process {other.pid} is using it"):
            SerialChannel(terminal.address, wall, Opening())
        other.kill()
        other.wait()

    SerialChannel(terminal.address, wall, Opening()).close()


def test_a_closed_channel_leaves_its_port_to_the_next(
    channel: SerialChannel, wall: WallTimeline, terminal: Terminal
) -> None:
    channel.close()
    channel.close()

    SerialChannel(terminal.address, wall, Opening()).close()


def test_a_reply_in_drops_cannot_stretch_the_deadline(serial_wire: Wire) -> None:
    serial_wire.link.exchange(b"ECHO? hello\n")
    drops = [piece for _ in range(20) for piece in (Pause(0.02), b"1")]
    serial_wire.twin.acts.append([*drops, HOLD, b"\n"])

    with pytest.raises(LinkTimeoutError) as caught:
        serial_wire.link.exchange(b"READ?\n", timeout_s=0.1)

    assert set(caught.value.partial) <= {ord("1")}
    assert serial_wire.link.exchange(b"ECHO? next\n") == (b"next",)


def test_a_stop_request_wakes_a_blocked_read(channel: SerialChannel, wall: WallTimeline) -> None:
    timer = threading.Timer(0.03, wall.stop.request, ["ctrl-c"])
    timer.start()
    began = time.monotonic()

    with pytest.raises(StopRequestedError, match="ctrl-c"):
        channel.readline(wall.now() + FAR_S)

    timer.join()
    assert time.monotonic() - began < 10.0


def test_a_write_that_nobody_reads_ends_at_its_deadline(channel: SerialChannel, wall: WallTimeline) -> None:
    with pytest.raises(LinkTimeoutError, match="takes no bytes"):
        channel.write(b"x" * 2**20, wall.now() + 0.1)


def test_a_stop_request_wakes_a_blocked_write(channel: SerialChannel, wall: WallTimeline) -> None:
    timer = threading.Timer(0.03, wall.stop.request, ["ctrl-c"])
    timer.start()

    with pytest.raises(StopRequestedError):
        channel.write(b"x" * 2**20, wall.now() + FAR_S)

    timer.join()


def test_a_port_that_is_pulled_out_while_a_read_waits_is_told_at_once(
    channel: SerialChannel, wall: WallTimeline, terminal: Terminal
) -> None:
    timer = threading.Timer(0.03, terminal.unplug)
    timer.start()
    began = time.monotonic()

    with pytest.raises(DisconnectedError, match="the port is gone") as caught:
        channel.readline(wall.now() + FAR_S)

    timer.join()
    assert time.monotonic() - began < 10.0
    assert "plug the instrument in again" in str(caught.value)


@pytest.mark.parametrize(
    "use",
    [
        lambda channel: channel.write(b"OUTP 0\n", FAR_S),
        lambda channel: channel.readline(FAR_S),
        lambda channel: channel.read_exact(1, FAR_S),
    ],
    ids=["write", "readline", "read_exact"],
)
def test_a_port_that_is_gone_is_told_whatever_is_done_with_it(
    channel: SerialChannel, terminal: Terminal, use: Callable[[SerialChannel], object]
) -> None:
    terminal.unplug()

    with pytest.raises(DisconnectedError, match="the port is gone"):
        use(channel)

    channel.close()


def test_a_port_that_comes_back_under_its_name_is_opened_again(wall: WallTimeline, tmp_path: Path) -> None:
    twin = ActingTwin()
    peer = PtyPeer(twin, tmp_path / "by-id-mount")
    address = f"serial://{peer.name}?baud=115200"
    with contextlib.closing(peer):
        link = Link(address, lambda: open_line(address, wall), NonceFamily(), wall)
        with contextlib.closing(link):
            link.exchange(b"ECHO? here\n")
            before = os.path.realpath(peer.name)
            twin.acts.append([CLOSE])
            with pytest.raises(DisconnectedError):
                link.exchange(b"READ?\n")

            link.open()

            assert link.exchange(b"ECHO? back\n") == (b"back",)
            assert os.path.realpath(peer.name) != before
