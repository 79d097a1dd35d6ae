"""What the tests of the links share."""

import tempfile
from collections.abc import Iterator
from pathlib import Path

import pytest
from link_peers import START, Wire, open_hislip_wire, open_loopback_wire, open_serial_wire, open_tcp_wire

from rigctl.timeline import VirtualTimeline, WallTimeline


@pytest.fixture(autouse=True)
def own_lock_files(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    monkeypatch.setattr(tempfile, "tempdir", str(tmp_path))
    return tmp_path


WIRES = {
    "tcp": open_tcp_wire,
    "loopback": open_loopback_wire,
    "serial": open_serial_wire,
    "hislip": open_hislip_wire,
}


@pytest.fixture(params=list(WIRES))
def wire(request: pytest.FixtureRequest) -> Iterator[Wire]:
    with WIRES[request.param]() as opened:
        yield opened


@pytest.fixture
def tcp_wire() -> Iterator[Wire]:
    with open_tcp_wire() as opened:
        yield opened


@pytest.fixture
def serial_wire() -> Iterator[Wire]:
    with open_serial_wire() as opened:
        yield opened


@pytest.fixture
def loopback_wire() -> Iterator[Wire]:
    with open_loopback_wire() as opened:
        yield opened


@pytest.fixture
def wall() -> Iterator[WallTimeline]:
    timeline = WallTimeline()
    yield timeline
    timeline.stop.close()


@pytest.fixture
def virtual() -> Iterator[VirtualTimeline]:
    timeline = VirtualTimeline(START)
    yield timeline
    timeline.stop.close()
