"""Benches with a scripted twin, whose script must have been followed to its end, and the ways to whole twins."""

from collections.abc import Iterator
from typing import get_args

import pytest
from scripted_twin import Bench, make_bench
from twin_places import Transport

from rigctl_drivers.gcode_family import GCODE
from rigctl_drivers.scpi_family import SCPI


@pytest.fixture
def scpi() -> Iterator[Bench]:
    bench = make_bench(SCPI)
    yield bench
    bench.twin.assert_done()


@pytest.fixture
def gcode() -> Iterator[Bench]:
    bench = make_bench(GCODE)
    yield bench
    bench.twin.assert_done()


@pytest.fixture(params=get_args(Transport))
def transport(request: pytest.FixtureRequest) -> Transport:
    found: Transport = request.param
    return found
