"""VISA's other ways: a VXI-11 instrument, and our HiSLIP server met by VISA's own client."""

import contextlib
import gc
import os
import subprocess
import sys
import threading
import time
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest
import pyvisa
from link_peers import CLOSE, HOLD, Act, ActingTwin, Complaint, NonceFamily, Pause, PortPeer
from vxi_peer import VxiPeer

from rigctl.errors import (
    BusyError,
    DisconnectedError,
    LinkTimeoutError,
    PlanError,
    RefusedError,
    StopRequestedError,
)
from rigctl.links.channel import Channel
from rigctl.links.family import Resynced
from rigctl.links.link import Link
from rigctl.links.serve_hislip import HislipPort
from rigctl.links.visa import VisaChannel
from rigctl.timeline import WallTimeline

ADDRESS = "visa://TCPIP0::127.0.0.1::inst0::INSTR"
FAR_S, SHORT_S = 60.0, 0.12


class PatientFamily(NonceFamily):
    """Asks for the second nonce when the first was read, as message buses want it."""

    def resync(self, channel: Channel, deadline_s: float) -> Resynced:
        stale = [channel.discard()]
        for nonce in self.nonces.sample(range(1, 256), 2):
            channel.write(b"*ESE %d;*ESE?\n" % nonce, deadline_s)
            while (line := channel.readline(deadline_s)) != b"%d\n" % nonce:
                stale.append(line)
        channel.write(b"*ESE 0\n", deadline_s)
        return Resynced(tuple(filter(None, stale)), tuple(self._complaints(channel, deadline_s)))


class Vxi:
    """An instrument on VXI-11, and a link to it."""

    def __init__(self, wall: WallTimeline) -> None:
        self.twin = ActingTwin()
        self.peer = VxiPeer(self.twin)
        self.timeline = wall
        self.family = PatientFamily()
        self.link = Link(ADDRESS, lambda: VisaChannel(ADDRESS, wall), self.family, wall)

    def echo(self, word: str) -> str:
        (line,) = self.link.exchange(f"ECHO? {word}\n".encode())
        return line.decode()


@pytest.fixture
def vxi(wall: WallTimeline, monkeypatch: pytest.MonkeyPatch) -> Iterator[Vxi]:
    opened = Vxi(wall)
    monkeypatch.setattr("pyvisa_py.protocols.rpc.PMAP_PORT", opened.peer.port)
    assert opened.echo("hello") == "hello"
    yield opened
    opened.link.close()
    opened.peer.close()


def test_an_answer_comes_back_without_its_terminator(vxi: Vxi) -> None:
    vxi.twin.acts.append([b"1.5E-03\r\n"])

    assert vxi.link.exchange(b"READ?\n") == (b"1.5E-03",)


def test_an_answer_longer_than_the_device_gives_at_once_is_one_line(vxi: Vxi) -> None:
    vxi.twin.acts.append([b"1.5," * 5000 + b"\n"])

    assert vxi.link.exchange(b"READ?\n") == (b"1.5," * 5000,)


def test_a_question_longer_than_the_device_takes_at_once_arrives_whole(vxi: Vxi) -> None:
    assert vxi.echo("x" * 5000) == "x" * 5000


def test_a_block_is_returned_whole_with_its_line_feeds(vxi: Vxi) -> None:
    vxi.twin.acts.append([b"#210", b"01234\n5678", b"\n"])

    assert vxi.link.exchange_block(b"CURVE?\n") == b"01234\n5678"


def test_the_end_of_a_message_ends_its_line(vxi: Vxi) -> None:
    vxi.peer.ends_without_line_feed = True

    assert [vxi.echo("1.5"), vxi.echo("2.5")] == ["1.5", "2.5"]


def test_what_came_before_a_clear_is_no_beginning_of_what_comes_after(vxi: Vxi) -> None:
    vxi.link.close()
    channel = VisaChannel(ADDRESS, vxi.timeline)
    vxi.twin.acts.append([b"1.2"])
    with contextlib.closing(channel):
        channel.write(b"READ?\n", vxi.timeline.now() + FAR_S)
        with pytest.raises(LinkTimeoutError):
            channel.readline(vxi.timeline.now() + SHORT_S)

        channel.write(b"ECHO? fresh\n", vxi.timeline.now() + FAR_S)

        assert channel.readline(vxi.timeline.now() + FAR_S) == b"fresh\n"


def test_an_instrument_with_nothing_to_say_is_not_asked_for_more(vxi: Vxi) -> None:
    reads = vxi.peer.reads
    vxi.link.write(b"OUTP 0\n")
    vxi.echo("once")

    assert vxi.peer.reads == reads + 1


@pytest.mark.parametrize(
    "act",
    [
        pytest.param([HOLD, b"STALE\n"], id="late"),
        pytest.param([b"1.2345", HOLD, b"67E-03\n"], id="torn"),
        pytest.param([b"1.2345"], id="missing terminator"),
        pytest.param([HOLD, b"STALE\nSTALE\n"], id="late and doubled"),
        pytest.param([b"1.5\n1.5\n"], id="doubled"),
    ],
)
def test_after_a_misdeed_the_old_reply_answers_no_later_question(vxi: Vxi, act: Act) -> None:
    vxi.twin.acts.append(act)
    with contextlib.suppress(LinkTimeoutError):
        vxi.link.exchange(b"READ?\n", timeout_s=SHORT_S)

    assert [vxi.echo(word) for word in ("one", "two", "three")] == ["one", "two", "three"]


def test_a_missing_terminator_raises_with_the_bytes_that_came(vxi: Vxi) -> None:
    vxi.twin.acts.append([b"1.234"])

    with pytest.raises(LinkTimeoutError) as caught:
        vxi.link.exchange(b"READ?\n", timeout_s=SHORT_S)

    assert caught.value.partial == b"1.234"
    assert caught.value.address == ADDRESS


def test_a_timeout_keeps_its_time(vxi: Vxi) -> None:
    vxi.family.longest_s = SHORT_S
    vxi.twin.acts.append([HOLD])
    began = time.monotonic()

    with pytest.raises(LinkTimeoutError):
        vxi.link.exchange(b"READ?\n", timeout_s=SHORT_S)

    assert SHORT_S <= time.monotonic() - began < 10.0


def test_the_device_is_cleared_before_anything_else_is_said(vxi: Vxi) -> None:
    vxi.twin.acts.append([])
    with pytest.raises(LinkTimeoutError):
        vxi.link.exchange(b"READ?\n", timeout_s=SHORT_S)
    vxi.echo("next")

    assert vxi.peer.clears == 1


def test_a_refused_question_is_told_with_the_instruments_own_words(vxi: Vxi) -> None:
    vxi.twin.acts.append([Complaint(-113, "Undefined header")])

    with pytest.raises(RefusedError, match="Undefined header"):
        vxi.link.exchange(b"REED?\n", timeout_s=SHORT_S)


def test_a_stop_request_is_seen_soon_and_the_safe_commands_pass_after_it(vxi: Vxi) -> None:
    vxi.twin.acts.append([b"1.2", HOLD, b"34\n"])
    timer = threading.Timer(0.05, vxi.timeline.stop.request, ["ctrl-c"])
    timer.start()
    began = time.monotonic()
    with pytest.raises(StopRequestedError, match="ctrl-c"):
        vxi.link.exchange(b"READ?\n", timeout_s=FAR_S)
    timer.join()

    with vxi.timeline.stop.masked():
        assert vxi.echo("closed") == "closed"

    assert time.monotonic() - began < 10.0


def test_a_stop_request_keeps_the_question_from_being_sent(vxi: Vxi) -> None:
    vxi.timeline.stop.request("ctrl-c")
    vxi.twin.heard.clear()

    with pytest.raises(StopRequestedError):
        vxi.echo("never")

    assert vxi.twin.heard == []


@pytest.mark.parametrize("act", [[CLOSE], [b"1.2", CLOSE]], ids=["at once", "in mid-reply"])
def test_a_closed_connection_is_told_and_opened_again(vxi: Vxi, act: Act) -> None:
    vxi.twin.acts.append(act)
    began = time.monotonic()
    with pytest.raises(DisconnectedError) as caught:
        vxi.link.exchange(b"READ?\n", timeout_s=FAR_S)
    vxi.link.open()

    assert caught.value.address == ADDRESS
    assert time.monotonic() - began < 5.0  # a farewell to nobody would take that long by itself
    assert vxi.echo("back") == "back"


@pytest.mark.filterwarnings("ignore:unclosed:ResourceWarning")  # VISA leaves the socket of a failed opening lying
def test_nobody_listening_is_told_in_our_own_words(
    wall: WallTimeline, monkeypatch: pytest.MonkeyPatch, capfd: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.setattr("pyvisa_py.protocols.rpc.PMAP_PORT", 1)

    with pytest.raises(DisconnectedError, match="VISA") as caught:
        VisaChannel(ADDRESS, wall)

    assert caught.value.address == ADDRESS
    assert capfd.readouterr() == ("", "")
    del caught
    gc.collect()


@pytest.mark.parametrize("resource", ["GPIB0::7::INSTR", "USB0::0x0957::0x1A07::My7::INSTR"])
def test_a_bus_that_this_computer_lacks_is_told_in_our_own_words(wall: WallTimeline, resource: str) -> None:
    for _ in range(2):
        with pytest.raises(DisconnectedError, match="VISA") as caught:
            VisaChannel(f"visa://{resource}", wall)

        assert "installed" in str(caught.value) or "nothing answers" in str(caught.value)


@pytest.mark.parametrize("address", ["tcp://127.0.0.1:4880", "serial:///dev/ttyUSB0?baud=9600", "GPIB0::7::INSTR"])
def test_another_kind_of_address_is_a_mistake_of_the_plan(wall: WallTimeline, address: str) -> None:
    with pytest.raises(PlanError):
        VisaChannel(address, wall)


def test_a_second_owner_is_refused_and_the_closed_channel_makes_room(vxi: Vxi) -> None:
    with pytest.raises(BusyError, match=f"process {os.getpid()} is using it"):
        VisaChannel(ADDRESS, vxi.timeline)
    vxi.link.close()
    vxi.link.close()

    VisaChannel(ADDRESS, vxi.timeline).close()


def test_closing_one_session_leaves_the_others_open(vxi: Vxi) -> None:
    peer = PortPeer(ActingTwin(), lambda *parts: HislipPort(*parts, device="hislip0"))
    with contextlib.closing(peer):
        VisaChannel(peer.address, vxi.timeline).close()

    assert vxi.echo("still here") == "still here"


def test_visa_is_imported_at_the_first_opening_only() -> None:
    script = "import sys, rigctl.links.opening, rigctl.links.serve; print({'pyvisa', 'serial'} & set(sys.modules))"
    done = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, check=True)

    assert done.stdout.strip() == "set()"


class Independent:
    """VISA's own HiSLIP client on our server."""

    def __init__(self) -> None:
        self.twin = ActingTwin()
        self.peer = PortPeer(self.twin, lambda *parts: HislipPort(*parts, device="hislip0"))
        manager: Any = pyvisa.ResourceManager("@py")
        self.resource = manager.open_resource(self.peer.address.removeprefix("visa://"))
        self.resource.timeout = 5000
        self.resource.read_termination = self.resource.write_termination = "\n"


@pytest.fixture
def independent() -> Iterator[Independent]:
    opened = Independent()
    yield opened
    opened.resource.close()
    opened.peer.close()


def test_our_hislip_server_answers_an_independent_client(independent: Independent) -> None:
    answers = [independent.resource.query(f"ECHO? {number}") for number in range(5)]

    assert answers == ["0", "1", "2", "3", "4"]
    assert independent.twin.heard == [b"ECHO? %d" % number for number in range(5)]


def test_our_hislip_server_clears_for_an_independent_client(independent: Independent) -> None:
    independent.twin.acts.append([Pause(0.05), b"stale\n"])
    independent.resource.write("READ?")

    independent.resource.clear()  # takes 0.1 s

    assert independent.resource.query("ECHO? fresh") == "fresh"


def test_our_hislip_server_tells_an_independent_client_whether_an_answer_waits(independent: Independent) -> None:
    before = independent.resource.read_stb()
    independent.resource.write("ECHO? 1.5")
    deadline = time.monotonic() + 10.0
    while not independent.resource.read_stb() & 0x10:
        assert time.monotonic() < deadline
    answer = independent.resource.read()

    assert (before, answer, independent.resource.read_stb()) == (0, "1.5", 0)


def test_our_hislip_server_carries_long_messages_for_an_independent_client(independent: Independent) -> None:
    word = "0123456789" * 300_000

    assert independent.resource.query(f"ECHO? {word}") == word


def test_a_channel_of_visa_works_on_our_hislip_server_too(wall: WallTimeline, tmp_path: Path) -> None:
    peer = PortPeer(ActingTwin(), lambda *parts: HislipPort(*parts, device="hislip0"))
    with contextlib.closing(peer):
        link = Link(peer.address, lambda: VisaChannel(peer.address, wall), PatientFamily(), wall)
        with contextlib.closing(link):
            assert link.exchange(b"ECHO? 1.5\n") == (b"1.5",)
