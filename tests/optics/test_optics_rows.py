"""Visits one by one, put together into the columns of a train."""

import numpy as np
import pytest
from optics_cases import assemble, each, polarizer, retarder, warmed

from rigctl.optics import Row, readings, visits_of

TRAIN = assemble(
    polarizer("entry"),
    warmed(retarder("part", waves=0.25, mount="part mount"), "oven", per_k=1e-3),
    polarizer("exit", mount="exit mount"),
)


def test_time_is_told_in_hours_and_openness_as_it_is() -> None:
    visits = visits_of([Row(0.0, False), Row(1800.0, True), Row(7200.0, True)], TRAIN)

    assert np.array_equal(visits.time_h, [0.0, 0.5, 2.0])
    assert np.array_equal(visits.is_open, [False, True, True])


def test_a_dark_takes_over_what_it_does_not_tell() -> None:
    lit = Row(1.0, True, {"part mount": 30.0}, {"oven": 28.0}, labels={"step": "plate"})

    visits = visits_of([Row(0.0, False), lit], TRAIN)

    assert np.array_equal(visits.angle_deg["part mount"], [30.0, 30.0])
    assert np.array_equal(visits.temperature_c["oven"], [28.0, 28.0])
    assert visits.levels["step"].labels == ("plate",)
    assert np.array_equal(visits.levels["step"].index, [0, 0])


def test_every_mount_and_temperature_of_the_train_has_a_column() -> None:
    visits = visits_of([Row(0.0, True, {"part mount": 10.0, "stranger": 5.0})], TRAIN)

    assert set(visits.angle_deg) == {"part mount", "exit mount"}
    assert set(visits.temperature_c) == {"oven"}
    assert np.isfinite(readings(TRAIN, visits, {})["signal"]).all()


def test_elements_that_nobody_mentions_were_in_the_beam() -> None:
    rows = [Row(0.0, True), Row(1.0, True, present={"part": False}), Row(2.0, True, present={"exit": True})]

    visits = visits_of(rows, TRAIN)

    assert np.array_equal(visits.present["part"], [True, False, True])
    assert np.array_equal(visits.present["exit"], [True, True, True])


def test_levels_come_in_the_order_in_which_they_were_visited() -> None:
    labels = ["28 degC", "22 degC", "28 degC", "25 degC"]

    levels = visits_of([Row(float(k), True, labels={"oven": label}) for k, label in enumerate(labels)], TRAIN).levels

    assert levels["oven"].labels == ("28 degC", "22 degC", "25 degC")
    assert np.array_equal(levels["oven"].index, [0, 1, 0, 2])


@pytest.mark.parametrize("waves", [0.2, 0.3])
def test_the_light_of_rows_is_that_of_their_levels(waves: float) -> None:
    train = each(TRAIN, "part.retardance", "oven")
    rows = [Row(float(k), True, {"part mount": 30.0}, {"oven": 25.0}, labels={"oven": o}) for k, o in enumerate("ab")]

    level = readings(train, visits_of(rows, train), {"part.retardance @ b": waves})["signal"]

    alike = readings(TRAIN, visits_of(rows, TRAIN), {"part.retardance": waves})["signal"]
    assert level[1] == alike[1]
    assert level[0] == readings(TRAIN, visits_of(rows, TRAIN), {})["signal"][0]
