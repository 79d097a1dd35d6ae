"""The keys of a rig file's `simulated:`, for the bench as a whole and for each kind of instrument.

It owns their names, defaults and meanings, and how one is looked up.
"""

from collections.abc import Mapping
from typing import Any

from rigctl.files.rig import InstrumentEntry, Rig
from rigctl.interfaces import Option

MOUNT, METER, SWITCH = "gcode-rotary", "scpi-power-meter", "scpi-switch"
RELAY, SLIDE = "scpi-relay", "scpi-slide"
SOURCE, CONTROLLER = "scpi-current-source", "scpi-temperature-controller"

BENCH_OPTIONS: Mapping[str, Option] = {
    "power": Option("power", meaning="true power of the source: at the start of the run, as prepared"),
    "drift": Option("drift", meaning="true drift of the source's power"),
    "source noise": Option(
        "ratio",
        default=0.0,
        meaning="noise of the source that all heads see alike: standard deviation of a reading of 100 ms, white",
    ),
}
TWIN_OPTIONS: Mapping[str, Mapping[str, Option]] = {
    METER: {
        "noise": Option("power", meaning="standard deviation of a reading in the dark, on any range"),
        "relative noise": Option("ratio", meaning="standard deviation that grows with the power, the head's own"),
        "time constant": Option("time", meaning="true lag of the head"),
        "stray light": Option("power", meaning="true light that reaches the head beside the beam"),
    },
    MOUNT: {},
    SWITCH: {},
    RELAY: {},
    SLIDE: {},
    SOURCE: {
        "threshold": Option("current", meaning="where the diode begins to emit, at the temperature as prepared"),
        "characteristic temperature": Option(
            "temperature difference", meaning="rise of temperature that makes the diode's threshold grow e-fold"
        ),
        "turn-on voltage": Option("voltage", default=1.5, meaning="voltage of the diode at next to no current"),
        "series resistance": Option("resistance", default=5.0, meaning="what more voltage the diode needs per current"),
        "interlock opens after": Option("time", meaning="when somebody opens the interlock, from the start of the run"),
    },
    CONTROLLER: {
        "sensor": Option("thermistor", meaning="true sensor, where it is not the one that the rig file states"),
        "noise": Option("temperature difference", default=1e-3, meaning="standard deviation of a measurement"),
        "time constant": Option("time", default=4.0, meaning="with which the temperature closes on its setpoint"),
        "slew": Option("temperature slope", default=0.2, meaning="how fast the temperature can go at most"),
        "idle time constant": Option(
            "time", default=60.0, meaning="with which the temperature goes back to that of the room"
        ),
        "sensor breaks after": Option("time", meaning="when the sensor breaks, from the start of the run"),
    },
}


def of_bench(rig: Rig, key: str) -> Any:
    """Return what a rig file says of the bench, or the default."""
    written = rig.simulated.bench.get(key)
    return BENCH_OPTIONS[key].default if written is None else written


def of_twin(rig: Rig, entry: InstrumentEntry, key: str) -> Any:
    """Return what a rig file says of an instrument's twin, or the default."""
    written = rig.simulated.instruments.get(entry.name, {}).get(key)
    return TWIN_OPTIONS[entry.driver][key].default if written is None else written


def entries_of(rig: Rig, *drivers: str) -> list[InstrumentEntry]:
    """Return the instruments of these drivers, in the order of the rig file."""
    return [entry for entry in rig.instruments.values() if entry.driver in drivers]
