"""The wire tap: both directions with times, nothing changed, and no harm when its file fails."""

import io
import re
from typing import NoReturn

import pytest
from link_peers import CLOSE, ActingTwin, NonceFamily, Pause, Wire

from rigctl.errors import DisconnectedError, LinkTimeoutError, RecordError, StopRequestedError
from rigctl.links.link import Link
from rigctl.links.loopback import LoopbackChannel
from rigctl.links.tap import TappedChannel
from rigctl.timeline import VirtualTimeline

ADDRESS = "tcp://10.0.0.7:5025"


class CountingSink(io.StringIO):
    """Remembers what had been written at each flush."""

    def __init__(self) -> None:
        super().__init__()
        self.flushed: list[str] = []

    def flush(self) -> None:
        if not self.closed:
            self.flushed.append(self.getvalue())


class FullDisk(io.StringIO):
    """Takes some lines, then fails at the write and once more at the close."""

    name = "trace.txt"

    def __init__(self, lines: int) -> None:
        super().__init__()
        self._lines = lines

    def write(self, text: str) -> int:
        if self.getvalue().count("\n") >= self._lines:
            self._fail()
        return super().write(text)

    def close(self) -> None:
        super().close()
        self._fail()

    def _fail(self) -> NoReturn:
        raise OSError(28, "No space left on device")


@pytest.fixture
def twin() -> ActingTwin:
    return ActingTwin()


@pytest.fixture
def sink() -> CountingSink:
    return CountingSink()


@pytest.fixture
def channel(twin: ActingTwin, virtual: VirtualTimeline, sink: CountingSink) -> TappedChannel:
    return TappedChannel(LoopbackChannel(ADDRESS, twin, virtual), virtual, sink)


def tapped(twin: ActingTwin, virtual: VirtualTimeline, sink: io.StringIO) -> TappedChannel:
    return TappedChannel(LoopbackChannel(ADDRESS, twin, virtual), virtual, sink)


def test_each_transfer_is_one_line_with_instant_direction_address_and_bytes(
    channel: TappedChannel, twin: ActingTwin, sink: CountingSink
) -> None:
    twin.acts.append([Pause(1.25), b"1.5\r\n"])

    channel.write(b"READ?\n", 9.0)
    channel.readline(9.0)

    assert sink.getvalue().splitlines() == [
        f"     0.000000 -> {ADDRESS} b'READ?\\n'",
        f"     1.250000 <- {ADDRESS} b'1.5\\r\\n'",
    ]


def test_every_line_is_flushed_at_once(channel: TappedChannel, twin: ActingTwin, sink: CountingSink) -> None:
    channel.write(b"A\n", 9.0)
    channel.write(b"B\n", 9.0)

    assert [text.count("\n") for text in sink.flushed] == [1, 2]


def test_pieces_and_what_is_thrown_away_are_told_too(
    channel: TappedChannel, twin: ActingTwin, sink: CountingSink
) -> None:
    twin.acts.append([b"#12hi\n"])
    channel.write(b"CURVE?\n", 9.0)

    assert channel.read_exact(3, 9.0) == b"#12"
    assert channel.discard() == b"hi\n"
    assert channel.discard() == b""

    assert [line.split()[1:] for line in sink.getvalue().splitlines()[1:]] == [
        ["<-", ADDRESS, "b'#12'"],
        ["<x", ADDRESS, "b'hi\\n'"],
    ]


def test_a_failed_transfer_is_told_with_the_bytes_that_came(
    channel: TappedChannel, twin: ActingTwin, sink: CountingSink
) -> None:
    twin.acts.append([b"1.2"])
    channel.write(b"READ?\n", 3.0)

    with pytest.raises(LinkTimeoutError):
        channel.readline(3.0)

    assert sink.getvalue().splitlines()[-1] == f"     3.000000 !! {ADDRESS} b'1.2' LinkTimeoutError"


def test_a_stop_and_a_lost_connection_are_told_as_well(
    channel: TappedChannel, twin: ActingTwin, virtual: VirtualTimeline, sink: CountingSink
) -> None:
    twin.acts.append([CLOSE])
    channel.write(b"READ?\n", 3.0)
    with pytest.raises(DisconnectedError):
        channel.discard()
    virtual.stop.request("ctrl-c")
    with pytest.raises(StopRequestedError):
        channel.write(b"READ?\n", 3.0)

    assert re.findall(r"\w+Error", sink.getvalue()) == ["DisconnectedError", "StopRequestedError"]


def test_bytes_that_cannot_be_printed_stay_on_one_line(channel: TappedChannel, sink: CountingSink) -> None:
    channel.write(b"\x18\xff\n\r\x00", 3.0)

    assert sink.getvalue().endswith(" b'\\x18\\xff\\n\\r\\x00'\n")
    assert sink.getvalue().count("\n") == 1


def test_a_tapped_link_behaves_as_one_without(wire: Wire) -> None:
    sink = io.StringIO()
    link = Link(
        wire.address,
        lambda: TappedChannel(wire.open_channel(), wire.timeline, sink),
        NonceFamily(),
        wire.timeline,
    )

    answer = link.exchange(b"ECHO? 1.5\n")
    link.close()

    assert answer == (b"1.5",)
    assert "-> " + wire.address + " b'ECHO? 1.5\\n'" in sink.getvalue()
    assert not sink.closed


def test_a_full_disk_is_told_once_and_the_bytes_pass_on(twin: ActingTwin, virtual: VirtualTimeline) -> None:
    channel = tapped(twin, virtual, FullDisk(lines=1))
    channel.write(b"A\n", 9.0)

    with pytest.raises(RecordError, match="No space left") as caught:
        channel.write(b"B\n", 9.0)
    channel.write(b"OUTP 0\n", 9.0)

    assert caught.value.where == "trace.txt"
    assert twin.heard == [b"A", b"B", b"OUTP 0"]


def test_a_full_disk_is_told_once_for_all_channels_that_share_it(twin: ActingTwin, virtual: VirtualTimeline) -> None:
    sink = FullDisk(lines=0)
    with pytest.raises(RecordError):
        tapped(twin, virtual, sink).write(b"A\n", 9.0)

    tapped(twin, virtual, sink).write(b"OUTP 0\n", 9.0)

    assert twin.heard == [b"A", b"OUTP 0"]
