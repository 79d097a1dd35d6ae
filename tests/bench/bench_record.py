"""What recording costs: a durable record against bare system calls; views and loading of a long night.

Prints its figures; fails when a durable record costs more than 1.5 times one write and fdatasync of the same
bytes, measured in turn so that both see the same disk.
"""

import os
import statistics
import sys
import tempfile
import time
from collections.abc import Callable
from datetime import UTC, datetime
from functools import partial
from pathlib import Path
from typing import Any

from rigctl.interfaces import Dwell, Flag
from rigctl.record import (
    AxisLayout,
    Document,
    Header,
    RunWriter,
    StepLayout,
    create_run,
    dwell_record,
    load_run,
    verify_run,
)
from rigctl.record.journal import frame

RECORDS = 1500
VISITS = (4, 50, 72)
DARK_EVERY = 900
ALLOWED = 1.5


def header() -> Header:
    """Temperatures by currents by angles, with a meter and a monitor: 14,400 visits."""
    names = (("oven", "temperature", "degC"), ("diode", "current", "A"), ("part mount", "angle", "deg"))
    axes = tuple(
        AxisLayout(f"{role} {quantity}".replace(" ", "_"), role, units, tuple(map(float, range(length))))
        for (role, quantity, units), length in zip(names, VISITS, strict=True)
    )
    empty = Document.of("recipe: bench\n", "bench.yaml")
    return Header(
        uuid="bench",
        start=datetime(2026, 12, 1, tzinfo=UTC),
        title="bench",
        recipe=empty,
        rig=empty,
        steps=(StepLayout("data", axes),),
        detectors=("signal", "monitor"),
        monitor="monitor",
    )


def detectors(t_s: float, number: int) -> dict[str, Any]:
    """Four readings of each meter."""
    levels = tuple(1e-4 * (1.0 + 1e-3 * ((number * 7 + i * 13) % 17)) for i in range(4))
    dwell = dwell_record(Dwell(levels, Flag(0), 2e-3, t_s, t_s + 0.4))
    return {"signal": dwell, "monitor": dwell}


def visit(number: int) -> dict[str, Any]:
    """A visit as a rehearsal of the full bench records it."""
    t_s = 2.0 * number
    place, angle = divmod(number, VISITS[2])
    asked = {"oven": 22.0 + place // VISITS[1], "diode": 1e-3 * (place % VISITS[1]), "part mount": float(angle)}
    tec = {"temperature_c": 24.001 + 1e-6 * number, "resistance_ohm": 10_450.3}
    return {
        "kind": "visit",
        "step": "data",
        "visit": number,
        "index": [*divmod(place, VISITS[1]), angle],
        "attempt": 1,
        "start": 1,
        "t_begin": t_s,
        "t_end": t_s + 1.5,
        "asked": asked,
        "read": {role: value + 0.001 for role, value in asked.items()},
        "detectors": detectors(t_s, number),
        "conditions": {"diode": {"current_a": 0.0341, "voltage_v": 1.913}, "diode tec": tec, "oven": tec},
        "present": {"part": True},
        "confirmed": True,
        "status": "ok",
        "why": "",
    }


def dark(number: int) -> dict[str, Any]:
    """A dark after that many visits."""
    t_s = 2.0 * number - 0.5
    about = {"kind": "dark", "what": "dark", "step": "data", "when": "during", "how": "by shutter"}
    return about | {"t_begin": t_s, "t_end": t_s + 0.4, "detectors": detectors(t_s, number)}


def timed_s(do: Callable[[], object]) -> float:
    """Duration of a call, s."""
    began = time.perf_counter()
    do()
    return time.perf_counter() - began


def compare_with_bare_calls(folder: Path) -> float:
    """Durable records and bare writes of the same bytes in turn; the ratio of their medians."""
    fd = os.open(folder / "bare", os.O_CREAT | os.O_APPEND | os.O_WRONLY)

    def write_bare(line: bytes) -> None:
        os.write(fd, line)
        os.fdatasync(fd)

    recorded, bare = [], []
    with create_run(folder / "durable.h5", header(), durable=True) as writer:
        for number in range(RECORDS):
            record = visit(number)
            line, _ = frame(record, 0)
            recorded.append(timed_s(partial(writer.append, record)))
            bare.append(timed_s(partial(write_bare, line)))
    os.close(fd)
    ratio = statistics.median(recorded) / statistics.median(bare)
    print(f"a record of {len(line)} bytes, median and 99th percentile:")
    print(f"durable record {statistics.median(recorded) * 1e6:6.0f} us {quantile(recorded) * 1e6:6.0f} us")
    print(f"bare calls     {statistics.median(bare) * 1e6:6.0f} us {quantile(bare) * 1e6:6.0f} us")
    print(f"ratio          {ratio:6.2f}    (allowed {ALLOWED})")
    return ratio


def quantile(values: list[float]) -> float:
    """The 99th percentile."""
    return statistics.quantiles(values, n=100)[98]


def record_all(writer: RunWriter, count: int) -> None:
    """Record every visit, and a dark now and then."""
    for number in range(count):
        if number % DARK_EVERY == 0:
            writer.append(dark(number))
        writer.append(visit(number))


def long_night(folder: Path) -> None:
    """Time views, closing, loading and verifying of the whole night."""
    count = VISITS[0] * VISITS[1] * VISITS[2]
    path = folder / "night.h5"
    with create_run(path, header(), durable=False) as writer:
        took = timed_s(lambda: record_all(writer, count))
        print(f"{count} records without sync {took:6.2f} s ({took / count * 1e6:.0f} us each)")
        print(f"first view  {timed_s(writer.view):6.2f} s, second {timed_s(writer.view):6.2f} s")
        journal = (folder / "night.h5.journal").stat().st_size
        print(f"close       {timed_s(lambda: writer.close('complete', t_s=3e4)):6.2f} s")
    print(f"load        {timed_s(lambda: load_run(path)):6.2f} s")
    print(f"verify      {timed_s(lambda: verify_run(path)):6.2f} s")
    print(f"journal {journal / 1e6:.1f} MB, file {path.stat().st_size / 1e6:.1f} MB")


def main() -> int:
    """Run both; 1 when a durable record is too dear."""
    with tempfile.TemporaryDirectory(dir=Path.cwd()) as folder:
        ratio = compare_with_bare_calls(Path(folder))
        long_night(Path(folder))
    return int(ratio > ALLOWED)


if __name__ == "__main__":
    sys.exit(main())
