"""What the tests of the links share."""

import tempfile
from collections.abc import Iterator
from pathlib import Path

import pytest
from link_peers import START, Wire, open_loopback_wire, open_tcp_wire

from rigctl.timeline import VirtualTimeline, WallTimeline


@pytest.fixture(autouse=True)
def own_lock_files(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    monkeypatch.setattr(tempfile, "tempdir", str(tmp_path))
    return tmp_path


@pytest.fixture(params=[open_tcp_wire, open_loopback_wire], ids=["tcp", "loopback"])
def wire(request: pytest.FixtureRequest) -> Iterator[Wire]:
    with request.param() as opened:
        yield opened


@pytest.fixture
def tcp_wire() -> Iterator[Wire]:
    with open_tcp_wire() as opened:
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
