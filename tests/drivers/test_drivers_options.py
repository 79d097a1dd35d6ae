"""What a rig file may say of each driver, and what the instrument can do then."""

from importlib.metadata import entry_points

import pytest

from rigctl.errors import FileError
from rigctl.files import parse_rig
from rigctl.interfaces import (
    Capabilities,
    ControllerCapabilities,
    MeterCapabilities,
    ShutterCapabilities,
    SourceCapabilities,
    StageCapabilities,
    SwitchCapabilities,
)
from rigctl.plugins import find_drivers
from rigctl.thermistor import Beta, SteinhartHart, Thermistor

BARE: dict[str, Capabilities] = {
    "gcode-rotary": StageCapabilities((-3600.0, 3600.0), 20.0, 100.0, 0.1, 0.001),
    "scpi-current-source": SourceCapabilities(current_a=0.2, compliance_v=5.0, resolution_a=10e-6),
    "scpi-power-meter": MeterCapabilities(
        ranges_w=(2e-6, 2e-5, 2e-4, 2e-3, 2e-2),
        time_constant_s=(10e-3,) * 5,
        noise_w=(20e-12, 20e-11, 20e-10, 20e-9, 20e-8),
        relative_noise=5e-4,
        saturation_w=2e-2,
        aperture_s=(1e-3, 10.0),
    ),
    "scpi-relay": SwitchCapabilities(moves_in_s=10e-3),
    "scpi-slide": SwitchCapabilities(moves_in_s=0.5),
    "scpi-switch": ShutterCapabilities(moves_in_s=20e-3),
    "scpi-temperature-controller": ControllerCapabilities(
        span_c=(5.0, 80.0), resolution_k=1e-3, typical_rate_k_per_s=0.05
    ),
}
"""What each can do when the rig file says nothing but where it is."""

WRITTEN: dict[str, tuple[str, Capabilities]] = {
    "scpi-current-source": (
        "channel: 2, largest current: 500 mA, largest compliance: 6.5 V, resolution: 1 uA",
        SourceCapabilities(current_a=0.5, compliance_v=6.5, resolution_a=1e-6),
    ),
    "scpi-relay": ("channel: 12, moves in: 5 ms", SwitchCapabilities(moves_in_s=5e-3)),
    "scpi-slide": ("channel: 4, at rest: out, moves in: 1.5 s", SwitchCapabilities(moves_in_s=1.5)),
    "scpi-switch": ("channel: 3, at rest: open, moves in: 50 ms", ShutterCapabilities(moves_in_s=50e-3)),
    "scpi-temperature-controller": (
        "channel: 2, span: -10 degC to 60 degC, resolution: 10 mK, typical rate: 1.2 K/min, "
        'thermistor: "beta 3976 K, 10 kOhm at 25 degC"',
        ControllerCapabilities(span_c=(-10.0, 60.0), resolution_k=0.01, typical_rate_k_per_s=0.02),
    ),
}


def able(driver: str, keys: str = "") -> Capabilities:
    drivers = find_drivers()
    entry = parse_rig(instrument(driver, keys), "bench.yaml", drivers, None).instruments["it"]
    return drivers[driver].capabilities(entry.options)


def instrument(driver: str, keys: str) -> str:
    more = f", {keys}" if keys else ""
    return f"rig: bench\ninstruments:\n  it: {{driver: {driver}, at: tcp://10.0.0.8:5025{more}}}\nroles: {{}}\n"


@pytest.mark.parametrize("driver", sorted(BARE))
def test_without_a_word_in_the_rig_file_an_instrument_can_do_what_is_common(driver: str) -> None:
    found, expected = able(driver), BARE[driver]

    if isinstance(found, MeterCapabilities) and isinstance(expected, MeterCapabilities):
        assert found.noise_w == pytest.approx(expected.noise_w)
    else:
        assert found == expected


def test_every_driver_that_is_installed_has_its_row() -> None:
    assert set(BARE) == {point.name for point in entry_points(group="rigctl.drivers")}


@pytest.mark.parametrize("driver", sorted(WRITTEN))
def test_what_the_rig_file_says_is_what_the_instrument_can_do(driver: str) -> None:
    keys, expected = WRITTEN[driver]

    assert able(driver, keys) == expected


@pytest.mark.parametrize("driver", sorted(BARE))
def test_every_option_says_what_it_means(driver: str) -> None:
    assert all(option.meaning for option in find_drivers()[driver].options.values())


@pytest.mark.parametrize(
    ("text", "sensor"),
    [
        ('"beta 3976 K, 10 kOhm at 25 degC"', Beta(10e3, 25.0, 3976.0)),
        ('"A 1.12924e-3, B 2.34108e-4, C 8.7755e-8"', SteinhartHart(1.12924e-3, 2.34108e-4, 8.7755e-8)),
    ],
)
def test_the_sensor_s_constants_are_read_from_the_rig_file(text: str, sensor: Thermistor) -> None:
    written = instrument("scpi-temperature-controller", f"thermistor: {text}")

    rig = parse_rig(written, "bench.yaml", find_drivers(), None)

    assert rig.instruments["it"].options["thermistor"] == sensor


@pytest.mark.parametrize(
    ("driver", "keys", "words"),
    [
        ("scpi-current-source", "largest current: 200", "has no unit"),
        ("scpi-current-source", "largest current: -1 mA", "not above zero"),
        ("scpi-current-source", "limit: 45 mA", "unknown key 'limit'"),
        ("scpi-slide", "at rest: closed", "not among the choices"),
        ("scpi-relay", "at rest: in", "unknown key 'at rest'"),
        ("scpi-temperature-controller", "span: 60 degC to 10 degC", "does not go up"),
        ("scpi-temperature-controller", "thermistor: 10 kOhm", "gives no constants of a thermistor"),
    ],
)
def test_a_mistake_in_a_driver_s_keys_is_told_with_its_place(driver: str, keys: str, words: str) -> None:
    with pytest.raises(FileError, match=r"bench\.yaml:3:") as caught:
        able(driver, keys)

    assert words in str(caught.value)
