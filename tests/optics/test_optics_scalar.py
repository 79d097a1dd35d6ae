"""The function of plain floats against the path through arrays, for everything that can move."""

import time

import numpy as np
import pytest
from optics_cases import assemble, bench_visits, pick_off, polarizer, random_bench, retarder, warmed

from rigctl.optics import Detector, Reader, Train, Visits, reader, readings

BOTH = ("signal", Detector("monitor", "splitter"))


def light_by_arrays(train: Train, visits: Visits) -> dict[str, np.ndarray]:
    """What the arrays say without gain, stray light and drift, for a source of unit power."""
    plain = (
        {"source.drift": 0.0} | {d.stray_light: 0.0 for d in train.detectors} | {d.gain: 1.0 for d in train.detectors}
    )
    return dict(readings(train, visits, {**plain, "source.power": 1.0}))


@pytest.mark.parametrize("seed", range(25))
def test_a_whole_bench_is_read_as_the_arrays_say(seed: int) -> None:
    rng = np.random.default_rng(seed)
    train, visits = random_bench(rng), bench_visits(rng)
    read, expected = reader(train, {}), light_by_arrays(train, visits)
    assert visits.power is not None

    for i in np.flatnonzero(visits.is_open):
        found = read(
            {mount: float(column[i]) for mount, column in visits.angle_deg.items()},
            float(visits.power[i]),
            {role: float(column[i]) for role, column in visits.temperature_c.items()},
            frozenset(name for name, column in visits.present.items() if not column[i]),
        )

        assert found == pytest.approx([column[i] for column in expected.values()], abs=1e-14)
        assert all(type(power) is float for power in found)


def warm_plate(**changes: float) -> Reader:
    train = assemble(
        polarizer("entry"),
        warmed(retarder("part", waves=0.2, axis_deg=30.0), "oven", per_k=0.01, reference_c=22.0),
        polarizer("exit"),
    )
    return reader(train, changes)


def test_without_a_temperature_an_element_is_at_its_reference() -> None:
    read = warm_plate()

    assert read({}, 1.0) == read({}, 1.0, {"oven": 22.0}) == read({}, 1.0, {"room": 40.0})
    assert read({}, 1.0) != read({}, 1.0, {"oven": 23.0})


def test_ten_kelvin_more_is_a_tenth_more_retardance() -> None:
    read = warm_plate()
    expected = 0.5 * (1.0 - np.sin(np.pi * 0.22) ** 2 * np.sin(np.deg2rad(60.0)) ** 2)

    assert read({}, 1.0, {"oven": 32.0})[0] == pytest.approx(expected, abs=1e-15)


def test_an_exact_coefficient_of_nought_binds_the_element() -> None:
    read = warm_plate(**{"part.temperature coefficient": 0.0})

    assert read({}, 1.0, {"oven": 90.0}) == read({}, 1.0)


def test_elements_come_and_go() -> None:
    read = reader(assemble(polarizer("entry"), polarizer("exit", axis_deg=90.0, mount="m")), {})

    crossed, without, again = (read({"m": 0.0}, 1.0, None, absent)[0] for absent in map(frozenset, ([], ["exit"], [])))

    assert crossed == again == pytest.approx(0.0, abs=1e-15)
    assert without == pytest.approx(0.5, abs=1e-15)


def test_with_everything_out_all_light_arrives() -> None:
    train = assemble(polarizer("entry"), pick_off("splitter", fraction=0.1), retarder("q", waves=0.25), detectors=BOTH)

    assert reader(train, {})({}, 2.0, absent=frozenset(["entry", "splitter", "q"])) == (2.0, 0.0)


def test_crossed_polarizers_in_front_leave_a_monitor_its_light() -> None:
    # The monitor stands where nothing moves, and what moves stands in the dark.
    train = assemble(
        pick_off("splitter", fraction=0.1),
        polarizer("entry"),
        polarizer("second", axis_deg=90.0),
        polarizer("part", mount="part mount"),
        detectors=BOTH,
    )

    signal, monitor = reader(train, {})({"part mount": 45.0}, 1.0)

    assert signal == pytest.approx(0.0, abs=1e-30)
    assert monitor == pytest.approx(0.1, abs=1e-15)


def test_values_given_hold_instead_of_the_nominal_ones() -> None:
    train = assemble(polarizer("entry"), pick_off("splitter", fraction=0.1), detectors=BOTH)

    assert reader(train, {"splitter.fraction": 0.4})({}, 1.0) == pytest.approx((0.3, 0.2), abs=1e-15)


def seconds_per_reading(read: Reader, angles_deg: dict[str, float]) -> float:
    def once() -> float:
        begun = time.perf_counter()
        for _ in range(2000):
            read(angles_deg, 1e-3)
        return (time.perf_counter() - begun) / 2000

    return min(once() for _ in range(10))


def test_a_reading_of_a_plate_between_polarizers_takes_microseconds() -> None:
    # 0.8 us where it was measured; a machine ten times slower passes.
    train = assemble(polarizer("entry"), retarder("part", waves=0.25, mount="m"), polarizer("exit"))

    assert seconds_per_reading(reader(train, {}), {"m": 10.0}) < 10e-6


def test_more_elements_that_stand_still_cost_nothing() -> None:
    part = retarder("part", waves=0.25, mount="m")
    still = [polarizer(f"element {i}", axis_deg=10.0 * i, ratio=0.1) for i in range(8)]

    few = seconds_per_reading(reader(assemble(part), {}), {"m": 10.0})
    many = seconds_per_reading(reader(assemble(*still[:4], part, *still[4:]), {}), {"m": 10.0})

    assert many < 3.0 * few
