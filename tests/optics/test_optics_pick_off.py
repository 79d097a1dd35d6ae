"""A pick-off takes a fraction of the light out of the beam, whatever its polarization, and a detector gets that."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from optics_cases import (
    Part,
    assemble,
    azimuth_deg,
    bench_visits,
    pick_off,
    polarizer,
    random_bench,
    random_visits,
    retarder,
    visits_at,
)
from test_optics_references import load

from rigctl.errors import PlanError
from rigctl.optics import Detector, Element, Quantity, Train, reader, readings

BOTH = ("signal", Detector("monitor", "splitter"))
seeds = st.integers(0, 2**32 - 1)


def split_train(*, fraction: float = 0.04) -> Train:
    """A polarizer on a mount in front of a pick-off, another behind it."""
    return assemble(
        polarizer("entry", mount="part mount"),
        pick_off("splitter", fraction=fraction),
        polarizer("exit", axis_deg=30.0),
        detectors=BOTH,
    )


@given(fraction=st.floats(0.0, 1.0), angle_deg=st.floats(-360.0, 360.0))
def test_the_monitor_gets_the_fraction_and_the_beam_the_rest(fraction: float, angle_deg: float) -> None:
    signal, monitor = reader(split_train(fraction=fraction), {})({"part mount": angle_deg}, 2.0)

    behind_entry = 2.0 * 0.5
    assert monitor == pytest.approx(fraction * behind_entry, abs=1e-12)
    cosine2 = np.cos(np.deg2rad(angle_deg - 30.0)) ** 2
    assert signal == pytest.approx((1.0 - fraction) * behind_entry * cosine2, abs=1e-12)


@given(seed=seeds, fraction=st.floats(0.0, 1.0))
def test_a_pick_off_does_not_polarize(seed: int, fraction: float) -> None:
    # It only weakens: put anywhere into a train, the detector at the end gets the rest of what it got.
    rng = np.random.default_rng(seed)
    parts: list[Part] = [
        polarizer("entry", axis_deg=float(rng.uniform(0, 180)), ratio=0.01),
        retarder("plate", waves=float(rng.uniform(0, 1)), mount="part mount"),
        polarizer("exit", axis_deg=float(rng.uniform(0, 180))),
    ]
    place, visits = int(rng.integers(0, 4)), random_visits(rng)
    source = (1.0, 0.2, -0.3, 0.4)
    bare = readings(assemble(*parts, source=source), visits, {})["signal"]

    parts.insert(place, pick_off("splitter", fraction=fraction))
    split = readings(assemble(*parts, source=source), visits, {})["signal"]

    assert split == pytest.approx((1.0 - fraction) * bare, abs=1e-12)


@given(seed=seeds)
def test_with_nothing_else_in_the_beam_no_light_is_lost(seed: int) -> None:
    rng = np.random.default_rng(seed)
    train = assemble(
        retarder("first", waves=float(rng.uniform(0, 1)), axis_deg=20.0),
        pick_off("splitter", fraction=float(rng.uniform(0, 1))),
        retarder("second", waves=float(rng.uniform(0, 1)), axis_deg=70.0),
        detectors=BOTH,
        source=(1.0, 0.5, 0.3, -0.2),
    )

    assert sum(reader(train, {})({}, 3.0)) == pytest.approx(3.0, abs=1e-12)


def test_two_pick_offs_in_a_row_take_from_what_is_left() -> None:
    train = assemble(
        pick_off("first", fraction=0.1),
        pick_off("second", fraction=0.5),
        detectors=(Detector("a", "first"), Detector("b", "second"), "signal"),
    )

    assert reader(train, {})({}, 1.0) == pytest.approx((0.1, 0.45, 0.45), abs=1e-15)


def test_two_detectors_may_stand_behind_one_pick_off() -> None:
    train = assemble(
        pick_off("splitter", fraction=0.2), detectors=(Detector("a", "splitter"), Detector("b", "splitter"))
    )

    assert reader(train, {})({}, 1.0) == pytest.approx((0.2, 0.2), abs=1e-15)


def test_what_turns_behind_the_pick_off_does_not_reach_the_monitor() -> None:
    train = assemble(
        polarizer("entry"), pick_off("splitter", fraction=0.3), polarizer("exit", mount="part mount"), detectors=BOTH
    )
    dial = np.arange(0.0, 180.0, 15.0)

    levels = readings(train, visits_at(dial), {})

    assert np.ptp(levels["monitor"]) == 0.0
    assert np.ptp(levels["signal"]) > 0.3


def py_pol_powers(train: Train, angles_deg: dict[str, float]) -> dict[str, float]:
    """Powers by py_pol: a pick-off is a neutral filter for the beam, and another for the detector behind it."""
    mueller, stokes = load("py_pol.mueller"), load("py_pol.stokes")
    light = stokes.Stokes().from_components(tuple(np.array([s]) for s in train.source))
    found = {}
    for element in train.elements:
        value = train.quantities[element.strength].value
        if element.kind == "pick-off":
            to_detector = mueller.Mueller().diattenuator_linear(Tmax=value, Tmin=value) * light
            found[element.name] = float(np.squeeze(to_detector.parameters.intensity(out_number=False)))
            light = mueller.Mueller().diattenuator_linear(Tmax=1.0 - value, Tmin=1.0 - value) * light
            continue
        azimuth = np.deg2rad(azimuth_deg(train, element, angles_deg))
        if element.kind == "polarizer":
            light = mueller.Mueller().diattenuator_linear(Tmax=1.0, Tmin=value, azimuth=azimuth) * light
        else:
            light = mueller.Mueller().retarder_linear(R=2 * np.pi * value, azimuth=azimuth) * light
    return found | {"": float(np.squeeze(light.parameters.intensity(out_number=False)))}


@pytest.mark.parametrize("seed", range(20))
def test_random_trains_with_two_pick_offs_agree_with_py_pol(seed: int) -> None:
    rng = np.random.default_rng(seed)
    train = random_bench(rng)  # at its reference temperatures
    angles = {mount: float(rng.uniform(-360.0, 360.0)) for mount in ("part mount", "exit mount")}

    powers = py_pol_powers(train, angles)

    expected = [powers[d.after or ""] for d in train.detectors]
    assert reader(train, {})(angles, 1.0) == pytest.approx(expected, abs=1e-12)


@pytest.mark.parametrize("seed", range(20))
def test_a_monitor_agrees_with_pypolar_about_what_stands_in_front_of_it(seed: int) -> None:
    jones, rng = load("pypolar.jones"), np.random.default_rng(seed)
    first_deg, second_deg, waves = (float(rng.uniform(0, 180)), float(rng.uniform(0, 180)), float(rng.uniform(0, 1)))
    train = assemble(
        retarder("plate", waves=waves, axis_deg=first_deg),
        polarizer("middle", axis_deg=second_deg),
        pick_off("splitter", fraction=0.08),
        polarizer("exit", axis_deg=11.0),
        detectors=BOTH,
        source=(1.0, 1.0, 0.0, 0.0),
    )

    field = jones.op_linear_polarizer(np.deg2rad(second_deg)) @ jones.op_retarder(
        np.deg2rad(first_deg), 2 * np.pi * waves
    )
    power = float(np.sum(np.abs(field @ np.array([1.0, 0.0])) ** 2))

    assert reader(train, {})({}, 1.0)[1] == pytest.approx(0.08 * power, abs=1e-12)


def test_each_detector_has_its_own_stray_light_and_gain() -> None:
    train = split_train().rewritten(
        Quantity("signal.stray light", "power", 0.5),
        Quantity("monitor.stray light", "power", 0.25),
        Quantity("signal.gain", "gain", 2.0),
    )
    bare = readings(split_train(), visits_at([10.0]), {})

    levels = readings(train, visits_at([10.0]), {})

    assert levels["signal"] == pytest.approx(2.0 * bare["signal"] + 0.5, abs=1e-15)
    assert levels["monitor"] == pytest.approx(bare["monitor"] + 0.25, abs=1e-15)


def test_a_train_read_by_its_signal_alone_still_loses_what_the_pick_off_takes() -> None:
    train, visits = split_train(), visits_at([0.0, 20.0])

    alone = train.read_by(["signal"])

    assert [d.name for d in alone.detectors] == ["signal"]
    assert "monitor.stray light" not in alone.quantities
    assert "splitter.fraction" in alone.quantities
    assert np.array_equal(readings(alone, visits, {})["signal"], readings(train, visits, {})["signal"])


def test_detectors_are_read_in_the_order_of_the_train() -> None:
    rng = np.random.default_rng(1)
    train, visits = random_bench(rng), bench_visits(rng)

    assert tuple(readings(train, visits, {})) == ("signal", "monitor", "second monitor", "other")


def test_a_detector_behind_nothing_is_refused_by_name() -> None:
    with pytest.raises(PlanError, match="no pick-off 'splitter' for a detector"):
        assemble(polarizer("entry"), detectors=BOTH)


def test_a_detector_behind_a_polarizer_is_refused() -> None:
    with pytest.raises(PlanError, match="no pick-off 'entry'"):
        assemble(polarizer("entry"), detectors=(Detector("monitor", "entry"),))


@pytest.mark.parametrize("element", [Element("x", "pick-off", mount="m"), Element("x", "pick-off", warmed_by="oven")])
def test_a_pick_off_that_turns_or_is_warmed_is_refused(element: Element) -> None:
    quantities = tuple(Quantity(address, "fraction", 0.1) for address in element.addresses)

    with pytest.raises(PlanError, match="a pick-off neither turns nor is warmed: 'x'"):
        assemble((element, quantities))


def test_a_pick_off_has_no_axis() -> None:
    element = Element("splitter", "pick-off")

    assert element.axis is None
    assert element.addresses == ("splitter.fraction",)
