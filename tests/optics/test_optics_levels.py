"""Quantities with a value for each level, elements that are warmed or taken out, and a source that a monitor tells."""

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from optics_cases import (
    assemble,
    bench_visits,
    each,
    pick_off,
    polarizer,
    random_bench,
    retarder,
    visits_at,
    warmed,
)

from rigctl.errors import PlanError
from rigctl.optics import Detector, Levels, Quantity, Train, Visits, readings
from rigctl.optics.kernel import Array

OVEN = Levels(("22 degC", "28 degC"), np.array([0, 1, 0, 1]))


def plate() -> Train:
    return assemble(polarizer("entry"), retarder("part", waves=0.25, mount="part mount"), polarizer("exit"))


def at_two_ovens(train: Train | None = None) -> tuple[Train, Visits]:
    visits = visits_at([10.0, 10.0, 30.0, 30.0])
    return each(train or plate(), "part.retardance", "oven"), replace(visits, levels={"oven": OVEN})


def signal(train: Train, visits: Visits, **x: float) -> Array:
    named = {name.replace("_", ".", 1).replace("_", " "): value for name, value in x.items()}
    return readings(train, visits, named)["signal"]


def test_each_level_has_its_own_value() -> None:
    train, visits = at_two_ovens()
    x = {"part.retardance @ 22 degC": 0.2, "part.retardance @ 28 degC": 0.3}

    levels = readings(train, visits, x)["signal"]

    cold, warm = (readings(plate(), visits, {"part.retardance": waves})["signal"] for waves in (0.2, 0.3))
    assert np.array_equal(levels, np.where(OVEN.index == 0, cold, warm))


def test_a_level_that_is_not_told_has_the_value_of_all() -> None:
    train, visits = at_two_ovens()

    levels = readings(train, visits, {"part.retardance": 0.3, "part.retardance @ 22 degC": 0.2})["signal"]

    both = readings(train, visits, {"part.retardance @ 22 degC": 0.2, "part.retardance @ 28 degC": 0.3})["signal"]
    assert np.array_equal(levels, both)


def test_without_any_level_told_nothing_differs() -> None:
    train, visits = at_two_ovens()

    assert np.array_equal(readings(train, visits, {})["signal"], readings(plate(), visits, {})["signal"])


def test_a_levelled_train_has_a_quantity_for_each_level_in_the_place_of_the_first() -> None:
    train, visits = at_two_ovens()
    asked = replace(train.quantities["part.retardance"], is_unknown=True, u=0.01)

    fitted = train.rewritten(asked).levelled(visits).fitted

    assert [q.name for q in fitted] == ["part.retardance @ 22 degC", "part.retardance @ 28 degC"]
    assert [(q.value, q.u, q.is_unknown, q.each) for q in fitted] == [(0.25, 0.01, True, None)] * 2


def test_levelling_twice_is_levelling_once() -> None:
    train, visits = at_two_ovens()

    once = train.levelled(visits)

    assert once.levelled(visits) == once


def test_a_level_that_was_given_keeps_its_value() -> None:
    train, visits = at_two_ovens()
    known = Quantity("part.retardance @ 28 degC", "retardance", 0.31)

    assert train.rewritten(known).levelled(visits).quantities[known.name] == known


def test_levels_that_the_visits_do_not_tell_are_refused() -> None:
    train, _ = at_two_ovens()

    with pytest.raises(PlanError, match=r"'part\.retardance' has a value for each 'oven'"):
        train.levelled(visits_at([0.0]))
    with pytest.raises(PlanError, match="which the visits do not tell"):
        readings(train, visits_at([0.0]), {})


def test_a_level_of_a_quantity_without_levels_belongs_to_nothing() -> None:
    with pytest.raises(PlanError, match=r"'part\.retardance @ 22 degC' belongs to nothing"):
        plate().rewritten(Quantity("part.retardance @ 22 degC", "retardance", 0.2))


def test_power_and_drift_may_have_levels_too() -> None:
    train, visits = plate(), replace(visits_at([0.0, 0.0, 0.0, 0.0]), levels={"step": OVEN})
    train = each(each(train, "source.power", "step"), "source.drift", "step")
    x = {"source.power @ 28 degC": 3.0, "source.drift @ 22 degC": 0.5}

    levels = readings(train, visits, x)["signal"]

    expected = 0.5 * np.where(OVEN.index == 0, 1.0 + 0.5 * visits.centred_h, 3.0)
    assert levels == pytest.approx(expected, abs=1e-15)


def test_stray_light_and_gain_of_each_range() -> None:
    ranges = Levels(("20 uW", "2 mW"), np.array([0, 1]))
    train = assemble(polarizer("entry")).rewritten(Quantity("signal.gain", "gain", 1.0, each="range of signal"))
    train = each(train, "signal.stray light", "range of signal")
    visits = replace(visits_at([0.0, 0.0]), levels={"range of signal": ranges})

    levels = readings(train, visits, {"signal.gain @ 2 mW": 1.1, "signal.stray light @ 20 uW": 0.01})["signal"]

    assert levels == pytest.approx([0.51, 0.55], abs=1e-15)


@given(per_k=st.floats(-0.01, 0.01), warmer_k=st.floats(-20.0, 20.0))
def test_the_retardance_grows_by_its_coefficient_from_the_reference(per_k: float, warmer_k: float) -> None:
    warm = assemble(
        polarizer("entry"),
        warmed(retarder("part", waves=0.25, mount="part mount"), "oven", per_k=per_k, reference_c=20.0),
        polarizer("exit"),
    )
    visits = replace(visits_at([25.0]), temperature_c={"oven": np.array([20.0 + warmer_k])})

    cold = plate()

    expected = signal(cold, visits, part_retardance=0.25 * (1.0 + per_k * warmer_k))
    assert signal(warm, visits) == pytest.approx(expected, abs=1e-14)


@pytest.mark.parametrize(("kind", "value"), [("ratio", 0.04), ("leak", 0.2)])
def test_a_polarizer_is_warmed_in_either_form_alike(kind: str, value: float) -> None:
    train = assemble(
        polarizer("entry"),
        warmed(polarizer("part", ratio=0.04, mount="part mount"), "oven", per_k=0.02),
        polarizer("exit", axis_deg=40.0),
    ).rewritten(Quantity("part.extinction ratio", kind, value))
    visits = replace(visits_at([70.0]), temperature_c={"oven": np.array([30.0])})  # 5 K above the usual reference
    cold = assemble(
        polarizer("entry"), polarizer("part", ratio=0.044, mount="part mount"), polarizer("exit", axis_deg=40.0)
    )

    assert signal(train, visits) == pytest.approx(signal(cold, visits), abs=1e-15)


def test_a_temperature_that_nobody_told_is_refused_by_its_role() -> None:
    train = assemble(warmed(retarder("part", waves=0.25), "oven", per_k=1e-3))

    with pytest.raises(PlanError, match="how warm 'oven' was"):
        readings(train, visits_at([0.0]), {})


def test_an_element_out_of_the_beam_does_nothing() -> None:
    train = plate()
    visits = replace(visits_at([22.0, 22.0]), present={"part": np.array([True, False])})

    levels = readings(train, visits, {})["signal"]

    assert levels[0] == pytest.approx(readings(train, visits_at([22.0]), {})["signal"][0], abs=1e-15)
    assert levels[1] == pytest.approx(0.5, abs=1e-15)


def test_a_pick_off_out_of_the_beam_takes_nothing_and_gives_nothing() -> None:
    train = assemble(pick_off("splitter", fraction=0.1), detectors=("signal", Detector("monitor", "splitter")))
    visits = replace(visits_at([0.0, 0.0]), present={"splitter": np.array([True, False])})

    levels = readings(train, visits, {})

    assert levels["signal"] == pytest.approx([0.9, 1.0], abs=1e-15)
    assert levels["monitor"] == pytest.approx([0.1, 0.0], abs=1e-15)


def test_presence_may_be_written_as_0_and_1_and_be_told_of_strangers() -> None:
    visits = replace(visits_at([22.0, 22.0]), present={"part": np.array([1, 0]), "lens": np.array([0, 1])})

    assert visits.present["part"].dtype == bool
    assert readings(plate(), visits, {})["signal"][1] == pytest.approx(0.5, abs=1e-15)


def test_the_monitors_word_scales_the_light_and_not_the_stray_light() -> None:
    train = assemble(polarizer("entry"), stray_w=0.1)
    visits = replace(visits_at([0.0, 0.0, 0.0]), power=np.array([1.0, 0.9, 1.2]))

    assert readings(train, visits, {})["signal"] == pytest.approx([0.6, 0.55, 0.7], abs=1e-15)


@pytest.mark.parametrize("seed", range(10))
def test_the_visits_of_a_whole_bench_are_those_one_by_one(seed: int) -> None:
    rng = np.random.default_rng(seed)
    train, visits = random_bench(rng), bench_visits(rng)
    x = {"source.drift": 0.0}  # its zero is in the middle of all visits
    together = readings(train, visits, x)

    for i in range(visits.count):
        alone = readings(train, visits.rows(np.array([i])), x)
        for name, column in together.items():
            assert column[i] == pytest.approx(alone[name][0], abs=1e-15), name
