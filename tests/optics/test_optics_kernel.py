"""One element at a time: the kernel against Mueller matrices written out, and the forms of a strength."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from rigctl.optics.forms import from_cosine, from_leak, from_ratio, from_retardance
from rigctl.optics.kernel import Array, Coefficients, Stokes, coefficient_slopes, through, torque

unit = st.floats(-1.0, 1.0)
angles = st.floats(-np.pi, np.pi)
LIGHT = (1.0, 0.3, -0.4, 0.5)


def mueller(element: Coefficients, azimuth: float) -> Array:
    """The matrix written out: rotate into the element's frame, act, rotate back."""
    a, b, gc, gs = element
    own = np.array([[a, b, 0, 0], [b, a, 0, 0], [0, 0, gc, gs], [0, 0, -gs, gc]])
    matrix: Array = rotation(azimuth) @ own @ rotation(-azimuth)
    return matrix


def rotation(angle: float) -> Array:
    c, s = np.cos(2 * angle), np.sin(2 * angle)
    return np.array([[1, 0, 0, 0], [0, c, -s, 0], [0, s, c, 0], [0, 0, 0, 1]])


def turn(azimuth: float) -> tuple[float, float]:
    return float(np.cos(2 * azimuth)), float(np.sin(2 * azimuth))


def columns(values: Stokes[float]) -> Stokes[Array]:
    S0, S1, S2, S3 = (np.array([value]) for value in values)
    return S0, S1, S2, S3


@given(a=unit, b=unit, gc=unit, gs=unit, azimuth=angles)
def test_light_behind_an_element_is_its_matrix_times_the_light(
    a: float, b: float, gc: float, gs: float, azimuth: float
) -> None:
    element = Coefficients(a, b, gc, gs)

    assert through(LIGHT, turn(azimuth), element) == pytest.approx(mueller(element, azimuth) @ LIGHT, abs=1e-14)


@given(a=unit, b=unit, gc=unit, gs=unit, azimuth=angles)
def test_a_row_carried_back_is_the_transposed_matrix_times_the_row(
    a: float, b: float, gc: float, gs: float, azimuth: float
) -> None:
    element = Coefficients(a, b, gc, gs)

    back = through(LIGHT, turn(azimuth), element.reversed())

    assert back == pytest.approx(mueller(element, azimuth).T @ LIGHT, abs=1e-14)


def test_a_retarder_has_the_published_matrix() -> None:
    # 0.31 waves at 37 deg, rows and columns 1 to 3; py_pol, pypolar and Jones calculus agree to 1.1e-16.
    element, _ = from_retardance(0.31)
    azimuth = np.deg2rad(37.0)
    unit_vectors = ((0.0, 1.0, 0.0, 0.0), (0.0, 0.0, 1.0, 0.0), (0.0, 0.0, 0.0, 1.0))

    matrix = np.array([through(e, turn(azimuth), element)[1:] for e in unit_vectors]).T

    expected = [
        [-0.264179987446891, 0.362497778169024, -0.893758521668511],
        [0.362497778169024, 0.896055434762213, 0.256281132071059],
        [0.893758521668511, -0.256281132071059, -0.368124552684678],
    ]
    assert matrix == pytest.approx(np.array(expected), abs=1e-14)


def test_slopes_with_the_coefficients_are_differences_of_whole_matrices() -> None:
    element, azimuth, row = Coefficients(0.6, 0.3, 0.2, -0.4), 0.7, (0.5, -0.2, 0.1, 0.3)

    c, s = turn(azimuth)
    slopes = coefficient_slopes(columns(LIGHT), columns(row), (np.array([c]), np.array([s])))

    for k, slope in enumerate(slopes):
        one = Coefficients(*np.eye(4)[k])
        assert slope[0] == pytest.approx(np.array(row) @ mueller(one, azimuth) @ LIGHT, abs=1e-14), element._fields[k]


def test_the_torque_is_the_slope_of_a_common_turn() -> None:
    row, step = (0.5, -0.2, 0.1, 0.3), 1e-6

    ahead, behind = (np.array(row) @ rotation(h) @ LIGHT for h in (step, -step))

    assert torque(columns(LIGHT), columns(row))[0] == pytest.approx((ahead - behind) / (2 * step), rel=1e-8)


@given(ratio=st.floats(0.0, 1.0))
def test_a_polarizer_passes_its_axis_fully_and_its_ratio_across(ratio: float) -> None:
    element, _ = from_ratio(ratio)

    along = through((1.0, 1.0, 0.0, 0.0), (1.0, 0.0), element)[0]
    across = through((1.0, -1.0, 0.0, 0.0), (1.0, 0.0), element)[0]

    assert (along, across) == pytest.approx((1.0, ratio), abs=1e-15)


@given(leak=st.floats(0.0, 1.0))
def test_a_leak_is_the_root_of_the_ratio(leak: float) -> None:
    assert from_leak(leak)[0] == pytest.approx(from_ratio(leak * leak)[0], abs=1e-15)


def test_a_leak_of_opposite_sign_turns_only_the_phase() -> None:
    plus, minus = from_leak(0.1)[0], from_leak(-0.1)[0]

    assert (minus.mean, minus.contrast, minus.cosine) == (plus.mean, plus.contrast, -plus.cosine)


@given(waves=st.floats(-2.0, 2.0))
def test_the_cosine_form_differs_from_the_retardance_in_the_sine_alone(waves: float) -> None:
    whole, _ = from_retardance(waves)
    part, _ = from_cosine(float(np.cos(2 * np.pi * waves)))

    assert part == pytest.approx(whole._replace(sine=0.0), abs=1e-15)


def test_a_whole_wave_is_no_retarder_at_all() -> None:
    element, _ = from_retardance(1.0)

    assert through(LIGHT, turn(0.3), element) == pytest.approx(LIGHT, abs=1e-15)
