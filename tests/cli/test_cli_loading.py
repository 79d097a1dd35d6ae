"""Where files go, what is matched before anything is sent, the wire tap's file, and signals."""

import os
import signal
from collections.abc import Iterator
from datetime import UTC, datetime
from pathlib import Path

import pytest
from cli_cases import RECIPE, RIG

from rigctl.cli.loading import free_path, load
from rigctl.cli.signals import ENDING, stopping_on_signals
from rigctl.cli.tracing import tapping
from rigctl.errors import FileError, UsageError
from rigctl.links.channel import Channel
from rigctl.links.loopback import LoopbackChannel
from rigctl.links.tap import TappedChannel
from rigctl.timeline import StopRequest, VirtualTimeline


@pytest.fixture
def stop() -> Iterator[StopRequest]:
    request = StopRequest()
    yield request
    request.close()


class Echo:
    """A twin that says what it was told."""

    def __init__(self) -> None:
        self._heard = b""

    def receive(self, data: bytes, now_s: float) -> None:
        self._heard += data

    def next_ready_s(self) -> float | None:
        return 0.0 if self._heard else None

    def take(self, now_s: float) -> bytes:
        heard, self._heard = self._heard, b""
        return heard


@pytest.fixture
def timeline(stop: StopRequest) -> VirtualTimeline:
    return VirtualTimeline(datetime(2026, 1, 5, tzinfo=UTC), stop)


@pytest.fixture
def channel(timeline: VirtualTimeline) -> Channel:
    return LoopbackChannel("tcp://127.0.0.1:5001", Echo(), timeline)


def test_a_file_that_is_named_is_taken_as_it_is(tmp_path: Path) -> None:
    assert free_path(tmp_path / "night.h5", "recipe") == tmp_path / "night.h5"


def test_a_folder_gets_a_file_named_after_the_recipe(tmp_path: Path) -> None:
    assert free_path(tmp_path, "recipe") == tmp_path / "recipe.h5"


def test_without_a_place_the_file_goes_into_the_present_folder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)

    assert free_path(None, "recipe").resolve() == tmp_path / "recipe.h5"


def test_names_that_a_file_or_a_journal_has_are_passed_over(tmp_path: Path) -> None:
    (tmp_path / "recipe.h5").touch()
    (tmp_path / "recipe-2.h5.journal").touch()

    assert free_path(tmp_path, "recipe") == tmp_path / "recipe-3.h5"


def test_a_file_that_exists_is_refused(tmp_path: Path) -> None:
    (tmp_path / "night.h5").touch()

    with pytest.raises(UsageError, match="never overwritten") as told:
        free_path(tmp_path / "night.h5", "recipe")

    assert told.value.do == "Give another --out."


def test_a_folder_that_does_not_exist_is_refused_by_name(tmp_path: Path) -> None:
    with pytest.raises(UsageError, match=f"the folder {tmp_path / 'runs'} does not exist"):
        free_path(tmp_path / "runs" / "night.h5", "recipe")


def test_without_a_rig_every_role_of_a_recipe_gets_a_simulated_instrument(tmp_path: Path) -> None:
    (tmp_path / "recipe.yaml").write_text(RECIPE, encoding="utf-8")

    loaded = load(tmp_path / "recipe.yaml", None)

    assert set(loaded.rig.roles) == {"part mount", "signal", "shutter"}
    assert {entry.driver for entry in loaded.rig.instruments.values()} <= set(loaded.drivers)


def test_a_rig_that_does_not_fit_the_recipe_is_refused_while_loading(tmp_path: Path) -> None:
    (tmp_path / "recipe.yaml").write_text(RECIPE, encoding="utf-8")
    (tmp_path / "rig.yaml").write_text(
        RIG.replace("signal: head 1", "signal: shutter 1").replace(", shutter: shutter 1", ""), encoding="utf-8"
    )

    with pytest.raises(FileError, match="'shutter 1' fills the role 'signal' but is a shutter"):
        load(tmp_path / "recipe.yaml", tmp_path / "rig.yaml")


def test_without_a_trace_channels_stay_as_they_are(channel: Channel, timeline: VirtualTimeline) -> None:
    with tapping(None) as wrap:
        assert wrap(channel, timeline) is channel


def test_a_trace_has_a_line_for_each_transfer_of_every_channel(
    channel: Channel, timeline: VirtualTimeline, tmp_path: Path
) -> None:
    with tapping(tmp_path / "wire.log") as wrap:
        tapped = wrap(channel, timeline)
        tapped.write(b"*IDN?\n", 1.0)
        tapped.readline(1.0)

    lines = (tmp_path / "wire.log").read_text(encoding="ascii").splitlines()
    assert isinstance(tapped, TappedChannel)
    assert [line.split(maxsplit=1)[1] for line in lines] == [
        r"-> tcp://127.0.0.1:5001 b'*IDN?\n'",
        r"<- tcp://127.0.0.1:5001 b'*IDN?\n'",
    ]


def test_a_trace_that_exists_is_refused_and_kept(tmp_path: Path) -> None:
    (tmp_path / "wire.log").write_bytes(b"precious")

    with pytest.raises(UsageError, match=r"wire\.log cannot be begun: File exists"), tapping(tmp_path / "wire.log"):
        pass

    assert (tmp_path / "wire.log").read_bytes() == b"precious"


def test_a_trace_in_a_folder_that_does_not_exist_is_refused(tmp_path: Path) -> None:
    with pytest.raises(UsageError, match="No such file") as told, tapping(tmp_path / "runs" / "wire.log"):
        pass

    assert told.value.do == "Give another --trace."


@pytest.mark.parametrize("number", ENDING)
def test_a_signal_asks_to_stop_by_its_name(number: signal.Signals, stop: StopRequest) -> None:
    with stopping_on_signals(stop):
        os.kill(os.getpid(), number)

    assert stop.reasons == [number.name]


def test_a_second_signal_is_heard_too(stop: StopRequest) -> None:
    with stopping_on_signals(stop):
        os.kill(os.getpid(), signal.SIGINT)
        os.kill(os.getpid(), signal.SIGTERM)

    assert stop.reasons == ["SIGINT", "SIGTERM"]
    assert stop.is_hurried


@pytest.mark.parametrize("ends_badly", [False, True])
def test_signals_do_afterwards_what_they_did_before(ends_badly: bool, stop: StopRequest) -> None:
    before = {number: signal.getsignal(number) for number in ENDING}

    try:
        with stopping_on_signals(stop):
            assert all(signal.getsignal(number) is not before[number] for number in ENDING)
            if ends_badly:
                raise ZeroDivisionError
    except ZeroDivisionError:
        pass

    assert {number: signal.getsignal(number) for number in ENDING} == before


def test_under_nohup_a_terminal_that_is_closed_does_not_stop_the_run(stop: StopRequest) -> None:
    before = signal.signal(signal.SIGHUP, signal.SIG_IGN)
    try:
        with stopping_on_signals(stop):
            os.kill(os.getpid(), signal.SIGHUP)
            os.kill(os.getpid(), signal.SIGTERM)
        still = signal.getsignal(signal.SIGHUP)
    finally:
        signal.signal(signal.SIGHUP, before)

    assert stop.reasons == ["SIGTERM"]
    assert still is signal.SIG_IGN
