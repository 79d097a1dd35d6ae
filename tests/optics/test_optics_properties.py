"""What every train must do: keep energy, repeat with half a turn, scale with the source."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from optics_cases import assemble, polarizer, random_train, random_visits, retarder, visits_at

from rigctl.errors import PlanError
from rigctl.optics import Detector, Element, Quantity, Train, Visits, reader, readings

seeds = st.integers(0, 2**32 - 1)
angles = st.floats(-720.0, 720.0)


@given(seed=seeds)
def test_no_train_gives_more_power_than_it_gets_nor_less_than_none(seed: int) -> None:
    rng = np.random.default_rng(seed)

    level = readings(random_train(rng), random_visits(rng), {"source.power": 1.0})["signal"]

    assert level.min() > -1e-12
    assert level.max() < 1.0 + 1e-12


@given(seed=seeds)
def test_half_a_turn_of_any_mount_changes_nothing(seed: int) -> None:
    rng = np.random.default_rng(seed)
    train, visits = random_train(rng), random_visits(rng)

    turned = Visits({m: a + 180.0 for m, a in visits.angle_deg.items()}, visits.is_open, visits.time_h)

    assert readings(train, turned, {})["signal"] == pytest.approx(readings(train, visits, {})["signal"], abs=1e-12)


@given(seed=seeds, angle_deg=angles)
def test_turning_the_whole_train_in_unpolarized_light_changes_nothing(seed: int, angle_deg: float) -> None:
    rng = np.random.default_rng(seed)
    drawn, visits = random_train(rng), random_visits(rng)
    train = Train(drawn.elements, drawn.detectors, drawn.quantities)

    turned = {e.axis: train.quantities[e.axis].value + angle_deg for e in train.elements if e.axis}

    assert readings(train, visits, turned)["signal"] == pytest.approx(readings(train, visits, {})["signal"], abs=1e-11)


@given(seed=seeds, angle_deg=angles)
def test_an_axis_turned_forward_is_a_dial_offset_turned_back(seed: int, angle_deg: float) -> None:
    train = assemble(polarizer("entry"), polarizer("part", mount="part mount", ratio=0.01))
    visits = random_visits(np.random.default_rng(seed))

    by_axis = readings(train, visits, {"part.axis": angle_deg})["signal"]

    assert readings(train, visits, {"part.dial offset": -angle_deg})["signal"] == pytest.approx(by_axis, abs=1e-12)


@given(waves=st.floats(-3.0, 3.0), angle_deg=angles)
def test_swapping_fast_and_slow_axis_is_a_quarter_turn(waves: float, angle_deg: float) -> None:
    read = reader(
        assemble(
            polarizer("entry"),
            retarder("plate", waves=waves, mount="m"),
            retarder("q", waves=0.25, axis_deg=20),
        ),
        {},
    )
    swapped = reader(
        assemble(
            polarizer("entry"),
            retarder("plate", waves=-waves, mount="m"),
            retarder("q", waves=0.25, axis_deg=20),
        ),
        {},
    )

    assert read({"m": angle_deg}, 1.0) == pytest.approx(swapped({"m": angle_deg + 90.0}, 1.0), abs=1e-12)


@given(seed=seeds)
def test_retarders_alone_lose_nothing(seed: int) -> None:
    rng = np.random.default_rng(seed)
    parts = [
        retarder(f"plate {i}", waves=float(rng.uniform(-2, 2)), axis_deg=float(rng.uniform(0, 180))) for i in range(4)
    ]

    power = reader(assemble(*parts, source=(1.0, 0.3, -0.4, 0.5)), {})({}, 2.0)[0]

    assert power == pytest.approx(2.0, abs=1e-12)


def test_malus_law_holds_for_perfect_polarizers() -> None:
    train = assemble(polarizer("entry"), polarizer("part", mount="part mount", dial_offset_deg=12.0))
    dial = np.arange(0.0, 360.0, 7.0)

    level = readings(train, visits_at(dial), {})["signal"]

    assert level == pytest.approx(0.5 * np.cos(np.deg2rad(dial - 12.0)) ** 2, abs=1e-15)


def test_a_blocked_beam_leaves_the_stray_light() -> None:
    train = assemble(polarizer("part", mount="part mount"), stray_w=0.25)
    visits = Visits({"part mount": np.zeros(2)}, np.array([True, False]), np.zeros(2))

    assert np.array_equal(readings(train, visits, {})["signal"], [0.75, 0.25])


def test_drift_is_nothing_in_the_middle_of_the_time() -> None:
    train = assemble(drift_per_h=0.1)
    visits = Visits({}, np.ones(3, dtype=bool), np.array([5.0, 6.0, 7.0]))

    assert readings(train, visits, {})["signal"] == pytest.approx([0.9, 1.0, 1.1], abs=1e-15)


def test_the_scalar_reader_gives_light_only() -> None:
    train = assemble(power_w=7.0, stray_w=3.0, drift_per_h=5.0, detectors=("signal", "monitor"))

    assert reader(train, {})({}, 0.5) == (0.5, 0.5)


def test_a_quantity_without_a_value_is_refused_by_name() -> None:
    with pytest.raises(PlanError, match=r"'part\.axis' has no value; 'part\.extinction ratio' has no value"):
        Train((Element("part", "polarizer"),), (Detector("signal"),), assemble().quantities)


def test_a_quantity_of_nothing_is_refused_by_name() -> None:
    with pytest.raises(PlanError, match=r"'part\.colour' belongs to nothing"):
        assemble(polarizer("part")).rewritten(Quantity("part.colour", "angle", 0.0))


def test_an_element_of_unknown_kind_is_refused() -> None:
    with pytest.raises(PlanError, match="no element is called 'prism'"):
        Train((Element("part", "prism"),), (Detector("signal"),), assemble().quantities)


def test_two_elements_of_one_name_are_refused() -> None:
    with pytest.raises(PlanError, match=r"two parts of the train share 'part\.axis'"):
        assemble(polarizer("part"), polarizer("part"))


def test_columns_of_different_length_are_refused() -> None:
    with pytest.raises(PlanError, match="differ in length"):
        Visits({"part mount": np.zeros(3)}, np.ones(2, dtype=bool), np.zeros(2))


def test_visits_that_do_not_turn_a_mount_of_the_train_are_refused() -> None:
    with pytest.raises(PlanError, match="where 'part mount' stood"):
        readings(assemble(polarizer("part", mount="part mount")), visits_at([0.0], "other mount"), {})


def test_joined_visits_stand_one_after_another() -> None:
    first, second = visits_at([0.0, 10.0]), visits_at([20.0])

    joined = Visits.join(first, second)

    assert joined.count == 3
    assert np.array_equal(joined.angle_deg["part mount"], [0.0, 10.0, 20.0])


def test_visits_of_different_mounts_are_not_joined() -> None:
    with pytest.raises(PlanError, match="same mounts"):
        Visits.join(visits_at([0.0]), visits_at([0.0], "other mount"))


def test_rows_keep_only_what_is_marked() -> None:
    kept = visits_at([0.0, 10.0, 20.0]).rows(np.array([True, False, True]))

    assert np.array_equal(kept.angle_deg["part mount"], [0.0, 20.0])
    assert not kept.has_dark


def test_blocked_and_open_may_be_written_as_0_and_1() -> None:
    visits = Visits({}, np.array([0, 1]), np.zeros(2))

    assert visits.is_open.dtype == bool
    assert visits.has_dark
