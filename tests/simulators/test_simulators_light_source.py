"""The source: steady or a diode that somebody drives and cools."""

import pytest

from rigctl_sim.diode import Diode
from rigctl_sim.light_source import Driven, Source, Steady
from rigctl_sim.plant import Plant, PlantMake
from rigctl_sim.source_noise import SourceNoise
from rigctl_sim.trajectory import Trajectory

POWER_W = 2e-3
DIODE = Diode(POWER_W, current_a=34e-3, temperature_c=24.0, threshold_a=17e-3, characteristic_k=130.0)
SILENT = SourceNoise(1, 0.0)


@pytest.fixture
def current() -> Trajectory:
    return Trajectory(0.0)


@pytest.fixture
def plant() -> Plant:
    return Plant(PlantMake(24.0, time_constant_s=4.0, slew_k_per_s=0.2, idle_time_constant_s=60.0))


def test_a_steady_source_is_steady_but_for_its_drift() -> None:
    source = Source(Steady(POWER_W), 0.02, SILENT)

    assert [source.power_at(hours * 3600.0) for hours in (0, 1, 2)] == pytest.approx([2e-3, 2.04e-3, 2.08e-3])
    assert source.emission.moving() == ()


def test_a_diode_is_dark_until_a_current_flows(current: Trajectory, plant: Plant) -> None:
    source = Source(Driven(DIODE, current, plant), 0.0, SILENT)
    current.glide(5.0, 34e-3, 1e-3)

    assert [source.power_at(instant) for instant in (0.0, 5.0, 6.0)] == [0.0, 0.0, pytest.approx(POWER_W)]


def test_along_a_ramp_it_emits_by_its_closed_form(current: Trajectory, plant: Plant) -> None:
    source = Source(Driven(DIODE, current, plant), 0.0, SILENT)
    current.glide(0.0, 34e-3, 6.8)

    powers = [source.power_at(instant) for instant in (1.0, 3.4, 5.1, 6.8)]

    assert powers == pytest.approx([0.0, 0.0, POWER_W / 2, POWER_W], abs=1e-15)


def test_its_power_follows_its_temperature(current: Trajectory, plant: Plant) -> None:
    source = Source(Driven(DIODE, current, plant), 0.0, SILENT)
    current.glide(0.0, 34e-3, 1e-3)
    plant.regulate(10.0, 34.0)

    powers = [source.power_at(instant) for instant in (5.0, 30.0, 1e4)]

    assert powers == pytest.approx([DIODE.power_at(34e-3, celsius) for celsius in (24.0, 28.0, 34.0)], rel=1e-12)
    assert powers == sorted(powers, reverse=True)


def test_a_diode_drifts_like_any_source(current: Trajectory, plant: Plant) -> None:
    source = Source(Driven(DIODE, current, plant), -0.01, SILENT)
    current.glide(0.0, 34e-3, 1e-3)

    assert source.power_at(7200.0) == pytest.approx(0.98 * POWER_W, rel=1e-12)


def test_only_the_current_changes_its_light_quickly(current: Trajectory, plant: Plant) -> None:
    assert Driven(DIODE, current, plant).moving() == (current,)
