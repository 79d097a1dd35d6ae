"""Benches with a scripted twin; at the end of a test its script must have been followed to the end."""

from collections.abc import Iterator

import pytest
from scripted_twin import Bench, make_bench

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
