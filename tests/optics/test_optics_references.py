"""The forward model against two independent packages and against published numbers."""

import importlib
import warnings
from types import ModuleType

import numpy as np
import pytest
from optics_cases import assemble, azimuth_deg, polarizer, random_train, random_visits, retarder, visits_at

from rigctl.optics import Element, Train, reader, readings
from rigctl.optics.kernel import Array

SEEDS = range(40)


def load(name: str) -> ModuleType:
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # its docstrings hold invalid escapes
        return importlib.import_module(name)


def strength(train: Train, element: Element) -> float:
    short = "extinction ratio" if element.kind == "polarizer" else "retardance"
    return train.quantities[f"{element.name}.{short}"].value


def py_pol_power(train: Train, angles_deg: dict[str, float]) -> float:
    mueller, stokes = load("py_pol.mueller"), load("py_pol.stokes")
    light = stokes.Stokes().from_components(tuple(np.array([s]) for s in train.source))
    for element in train.elements:
        azimuth = np.deg2rad(azimuth_deg(train, element, angles_deg))
        value = strength(train, element)
        if element.kind == "polarizer":
            matrix = mueller.Mueller().diattenuator_linear(Tmax=1.0, Tmin=value, azimuth=azimuth)
        else:
            matrix = mueller.Mueller().retarder_linear(R=2 * np.pi * value, azimuth=azimuth)
        light = matrix * light
    return train.quantities["source.power"].value * float(np.squeeze(light.parameters.intensity(out_number=False)))


def pypolar_jones(train: Train, angles_deg: dict[str, float]) -> Array:
    """Jones matrix of the whole train: a leaking polarizer is a perfect one and a weaker crossed one."""
    jones, product = load("pypolar.jones"), np.eye(2)
    for element in train.elements:
        azimuth = np.deg2rad(azimuth_deg(train, element, angles_deg))
        value = strength(train, element)
        if element.kind == "polarizer":
            crossed = jones.op_linear_polarizer(azimuth + np.pi / 2)
            matrix = jones.op_linear_polarizer(azimuth) + np.sqrt(value) * crossed
        else:
            matrix = jones.op_retarder(azimuth, 2 * np.pi * value)
        product = matrix @ product
    return product


@pytest.mark.parametrize("seed", SEEDS)
def test_random_trains_agree_with_py_pol(seed: int) -> None:
    rng = np.random.default_rng(seed)
    train = random_train(rng)
    angles = {mount: float(rng.uniform(-360.0, 360.0)) for mount in ("part mount", "exit mount")}

    expected = py_pol_power(train, angles)

    assert reader(train, {})(angles, train.quantities["source.power"].value)[0] == pytest.approx(expected, abs=1e-12)


@pytest.mark.parametrize("seed", SEEDS)
def test_random_trains_in_unpolarized_light_agree_with_pypolar(seed: int) -> None:
    rng = np.random.default_rng(1000 + seed)
    drawn = random_train(rng)
    train = Train(drawn.elements, drawn.detectors, drawn.quantities)
    angles = {mount: float(rng.uniform(-360.0, 360.0)) for mount in ("part mount", "exit mount")}

    matrix = pypolar_jones(train, angles)  # unpolarized light is half x, half y
    expected = 0.5 * float(np.sum(np.abs(matrix) ** 2))

    assert reader(train, {})(angles, 1.0)[0] == pytest.approx(expected, abs=1e-12)


@pytest.mark.parametrize("seed", SEEDS)
def test_the_scalar_reader_equals_the_array_path(seed: int) -> None:
    rng = np.random.default_rng(2000 + seed)
    train, visits = random_train(rng), random_visits(rng)
    power_w = train.quantities["source.power"].value

    read = reader(train, {})
    one_by_one = [
        read({mount: float(column[i]) for mount, column in visits.angle_deg.items()}, power_w)[0]
        for i in range(visits.count)
    ]

    assert readings(train, visits, {})["signal"] == pytest.approx(one_by_one * visits.is_open, abs=1e-15, rel=1e-14)


@pytest.mark.parametrize(
    ("exit_axis_deg", "expected"),
    [(0.0, 0.3679100062765548), (90.0, 0.6320899937234453), (25.0, 0.5539388929756749)],
)
def test_a_retarder_between_perfect_polarizers_gives_the_golden_numbers(exit_axis_deg: float, expected: float) -> None:
    # Four independent routes agree on these (Jones, Mueller, py_pol, pypolar): plate at 37 deg of 0.31
    # waves, horizontal light of unit power.
    train = assemble(
        retarder("plate", waves=0.31, axis_deg=37.0),
        polarizer("exit", axis_deg=exit_axis_deg),
        source=(1.0, 1.0, 0.0, 0.0),
    )

    assert reader(train, {})({}, 1.0)[0] == pytest.approx(expected, abs=1e-15)


def test_a_turned_retarder_between_parallel_polarizers_has_the_golden_harmonics() -> None:
    # A = 1 - s/2, B4 = s/2 of half the light, s = sin^2(delta/2), at 0.31 waves; four routes agree.
    train = assemble(retarder("plate", waves=0.31, mount="part mount"), polarizer("exit"), source=(1.0, 1.0, 0.0, 0.0))
    angles = np.arange(0.0, 360.0, 5.0)

    spectrum = np.fft.rfft(readings(train, visits_at(angles), {})["signal"]) / angles.size

    assert spectrum[0].real == pytest.approx(0.6579688618288305, abs=1e-14)
    assert 2 * spectrum[4].real == pytest.approx(0.3420311381711695, abs=1e-14)
    assert np.abs(np.delete(spectrum, [0, 4])).max() < 1e-15


def test_a_turned_retarder_before_a_polarizer_gives_the_golden_stokes_harmonics() -> None:
    # I = 1/2 [S0 + (1+cos d)/2 S1 + (1-cos d)/2 (S1 cos4t + S2 sin4t) - S3 sin d sin2t], evaluated for
    # S = (0.880, 0.3123, -0.4410, 0.5950) and 0.2437 waves; the form of Berry, Gabrielse and Livingston,
    # Appl. Opt. 16, 3200 (1977), citation from memory.
    train = assemble(
        retarder("plate", waves=0.2437, mount="part mount"),
        polarizer("exit"),
        source=(0.880, 0.3123, -0.4410, 0.5950),
    )
    angles = np.arange(0.0, 360.0, 5.0)

    spectrum = np.fft.rfft(readings(train, visits_at(angles), {})["signal"]) / angles.size

    expected = [0.5211647190, -0.2972669543, 0.0749852810, -0.1058869962]
    found = [spectrum[0].real, -2 * spectrum[2].imag, 2 * spectrum[4].real, -2 * spectrum[4].imag]
    assert found == pytest.approx(expected, abs=1e-10)
    assert abs(spectrum[2].real) < 1e-15


def test_two_like_polarizers_transmit_as_the_textbook_says() -> None:
    # T parallel = (k1^2 + k2^2)/2, T crossed = k1 k2 for unpolarized light (Handbook of Optics, vol. I,
    # "Polarizers", as quoted by others).
    ratio = 0.02
    train = assemble(polarizer("entry", ratio=ratio), polarizer("exit", ratio=ratio, mount="part mount"))

    read = reader(train, {})

    assert read({"part mount": 0.0}, 1.0)[0] == pytest.approx((1 + ratio**2) / 2, abs=1e-15)
    assert read({"part mount": 90.0}, 1.0)[0] == pytest.approx(ratio, abs=1e-15)
