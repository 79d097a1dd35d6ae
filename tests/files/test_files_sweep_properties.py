"""However the values of an axis are written, they are the numbers that were meant."""

import itertools
import math

import pytest
from files_cases import told
from full_cases import night
from hypothesis import given, settings
from hypothesis import strategies as st

from rigctl.files.recipe import Axis

OVEN = "oven: {values: [22 degC, 25 degC, 28 degC], steady: {within: 0.05 K, for: 5 min, give up after: 40 min}}"
counts = st.integers(min_value=1, max_value=30)
thousandths = st.integers(min_value=0, max_value=30_000)


def first(written: str) -> Axis:
    """Return an axis that stands before the others of the second step."""
    return night({OVEN: f"{written}\n      - {OVEN}"}).steps[1].sweep[0]


def oven(written: str) -> Axis:
    return night({OVEN: f"oven: {written}"}).steps[1].sweep[0]


@given(low=thousandths, step=st.integers(min_value=1, max_value=500), count=counts)
@settings(max_examples=40, deadline=None)
def test_a_range_of_temperatures_holds_the_decimal_numbers_between_its_ends(low: int, step: int, count: int) -> None:
    high = low + step * count

    axis = oven(f"{{range: {low / 1e3!r} degC to {high / 1e3!r} degC, step: {step} mK}}")

    assert axis.values == tuple((low + step * i) / 1e3 for i in range(count + 1))


@given(low=thousandths, step=st.integers(min_value=1, max_value=500), count=counts)
@settings(max_examples=40, deadline=None)
def test_a_range_of_currents_holds_the_decimal_numbers_between_its_ends(low: int, step: int, count: int) -> None:
    high = low + step * count

    axis = first(f"diode: {{range: {low / 1e3!r} mA to {high / 1e3!r} mA, step: {step} uA}}")

    assert axis.values == tuple((low + step * i) / 1e6 for i in range(count + 1))


@given(values=st.lists(thousandths, min_size=1, max_size=8))
@settings(max_examples=40, deadline=None)
def test_the_way_back_mirrors_the_way_there(values: list[int]) -> None:
    written = ", ".join(f"{value / 1e3!r} degC" for value in values)

    axis = oven(f"{{values: [{written}], there and back: true}}")

    assert axis.values == axis.values[::-1]
    assert axis.values[: len(values)] == tuple(value / 1e3 for value in values)
    assert len(axis.values) == 2 * len(values) - 1


@given(bounds=st.lists(st.integers(min_value=0, max_value=50), min_size=2, max_size=6, unique=True))
@settings(max_examples=40, deadline=None)
def test_segments_that_follow_on_each_other_visit_each_value_once(bounds: list[int]) -> None:
    ends = sorted(bounds)
    pieces = ", ".join(f"{{range: {a} mA to {b} mA, step: 1 mA}}" for a, b in itertools.pairwise(ends))

    axis = first(f"diode: {{segments: [{pieces}]}}")

    assert axis.values == tuple(n / 1e3 for n in range(ends[0], ends[-1] + 1))


@given(number=st.integers(min_value=2, max_value=72))
@settings(max_examples=20, deadline=None)
def test_every_stride_up_to_the_number_of_values_is_an_order(number: int) -> None:
    order = night({"interleaved 3": f"interleaved {number}"}).steps[1].order

    assert (order.kind, order.number) == ("interleaved", number)


@pytest.mark.parametrize("unit", ["degC", "°C"])
def test_both_ways_of_writing_degrees_celsius_are_one(unit: str) -> None:
    assert oven(f"{{values: [22 {unit}]}}").values == (22.0,)


def test_kelvins_and_degrees_may_stand_beside_each_other() -> None:
    assert oven("{values: [295.15 K, 22 degC]}").values == (22.0, 22.0)


@pytest.mark.parametrize(
    ("written", "what"),
    [
        ("{values: [-300 degC]}", "a temperature of -300 degC is below all there is"),
        ("{range: 22 to 28 K, step: 1 mA}", "'mA' is not a unit of a temperature difference"),
        ("{range: 22 degC to 20 degC, step: 1 K}", "the span '22 degC to 20 degC' does not go up"),
        ("{range: 20 degC to 22 degC, step: -1 K}", "a step of -1 K leads nowhere"),
        ("{range: 20 degC to 22 degC, step: 10 mK, values: [1 degC]}", "'values' and 'range' exclude each other"),
        ("{values: [20 degC], step: 1 K}", "'step' goes with 'turn' or 'range', not with 'values'"),
        ("{values: [20 degC], ramp: 5 mA/s}", "'ramp' goes with a current source alone"),
        ("{values: [20 degC], start: 5 deg}", "'start' goes with a mount alone"),
        ("{values: 20 degC}", "'20 degC' stands here"),
        ("20 degC", "'20 degC' stands here"),
        ("{segments: [{values: [20 degC], range: 1 to 2 degC}]}", "'values' and 'range' exclude each other"),
        ("{segments: [{step: 1 K}]}", "something is missing here"),
        ("{segments: [{values: [1 degC], turn: 1}]}", "unknown key 'turn'"),
        ("{values: [20 degC], there and back: maybe}", "'maybe' is neither true nor false"),
    ],
)
def test_temperatures_that_make_no_axis_are_told(written: str, what: str) -> None:
    (line,) = told(lambda: night({OVEN: f"oven: {written}"}))

    assert line.split(": ", 1)[1].startswith(what)


@pytest.mark.parametrize(
    ("written", "what"),
    [
        ("{range: -1 mA to 5 mA, step: 1 mA}", "a current from -1 mA to 5 mA would go through the diode backwards"),
        ("{values: [-1 uA]}", "a current of -1 uA would go through the diode backwards"),
        ("{range: 0 to 5 mA, step: 2 mA}", "steps of 2 mA do not divide the range of 5 mA"),
        ("{range: 0 to 5 mA, step: 1 deg}", "'deg' is not a unit of a current"),
        ("{values: [5 mA], steady: {within: 1 K, for: 1 s, give up after: 2 s}}", "'steady' goes with a temperature"),
        ("{values: [5 mA], ramp: 0 mA/s}", "a current slope of 0 mA/s is not above zero"),
    ],
)
def test_currents_that_make_no_axis_are_told(written: str, what: str) -> None:
    (line,) = told(lambda: first(f"diode: {written}"))

    assert line.split(": ", 1)[1].startswith(what)


def test_a_current_may_settle_after_each_move() -> None:
    assert first("diode: {values: [5 mA], settle: 100 ms}").settle_s == 0.1


def test_no_axis_is_finer_than_its_kind_is_set() -> None:
    axis = first("diode: {range: 0 uA to 1 uA, step: 0.1 uA}")

    assert all(math.isclose(value * 1e7, round(value * 1e7), abs_tol=1e-9) for value in axis.values)
