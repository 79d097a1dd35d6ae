"""A head in light that changes, against closed forms of the first-order lag."""

import cmath
import math
from collections.abc import Mapping
from itertools import pairwise

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rigctl_sim.head import HeadBesideBeam, HeadInBeam
from rigctl_sim.light_source import Source, Steady
from rigctl_sim.source_noise import SourceNoise
from rigctl_sim.trajectory import Trajectory
from rigctl_sim.world import Mount, Way, World

POWER_W, STRAY_W, TAU_S = 1e-3, 4e-7, 0.05


def malus(
    angles: Mapping[str, float], power_w: float, _temperatures: Mapping[str, float], _absent: frozenset[str]
) -> tuple[float]:
    return (power_w * math.cos(math.radians(angles["analyser"])) ** 2,)


def make_head(
    dial: Trajectory | None = None,
    *,
    shutter: Trajectory | None = None,
    drift: float = 0.0,
    stray_w: float = 0.0,
    noise: float = 0.0,
) -> HeadInBeam:
    mounts = {"analyser": Mount(dial or Trajectory(0.0), 1.0)}
    shutters = [] if shutter is None else [shutter]
    source = Source(Steady(POWER_W), drift, SourceNoise(1, noise))
    return HeadInBeam(World(source, malus, Way(mounts, shutters)), 0, stray_w=stray_w)


def make_pair(noise: float) -> tuple[HeadInBeam, HeadInBeam]:
    """Two heads in the light of one world; the second has stray light."""
    source = Source(Steady(POWER_W), 0.0, SourceNoise(1, noise))
    world = World(source, malus, Way({"analyser": Mount(Trajectory(0.0), 1.0)}))
    return HeadInBeam(world, 0, stray_w=0.0), HeadInBeam(world, 0, stray_w=STRAY_W)


def stepped(at_s: float, *, to: float = 1.0) -> Trajectory:
    """A shutter so fast that its ramp does not count."""
    shutter = Trajectory(1.0 - to)
    shutter.glide(at_s, to, 1e-9)
    return shutter


def test_in_steady_light_the_head_shows_the_light_and_its_stray_light() -> None:
    head = make_head(stray_w=STRAY_W)

    assert head.mean_w(0.0, 0.1, time_constant_s=TAU_S) == POWER_W + STRAY_W


def test_with_the_shutter_closed_only_stray_light_is_left() -> None:
    head = make_head(shutter=Trajectory(0.0), stray_w=STRAY_W)

    assert head.mean_w(0.0, 0.1, time_constant_s=TAU_S) == STRAY_W


def test_beside_the_beam_there_is_nothing() -> None:
    assert HeadBesideBeam().mean_w(0.0, 0.1, time_constant_s=TAU_S) == 0.0


@pytest.mark.parametrize("wait_s", [0.0, 0.01, 0.05, 0.2, 0.7])
@pytest.mark.parametrize("reading_s", [0.001, 0.1, 1.0])
def test_a_reading_after_a_step_has_the_tail_of_the_old_level(wait_s: float, reading_s: float) -> None:
    head = make_head(shutter=stepped(1.0))

    mean_w = head.mean_w(1.0 + wait_s, 1.0 + wait_s + reading_s, time_constant_s=TAU_S)

    tail = math.exp(-wait_s / TAU_S) * TAU_S / reading_s * (1.0 - math.exp(-reading_s / TAU_S))
    assert mean_w == pytest.approx(POWER_W * (1.0 - tail), abs=1e-7 * POWER_W)


def test_a_reading_across_a_step_holds_both_levels() -> None:
    head = make_head(shutter=stepped(1.0, to=0.0))

    mean_w = head.mean_w(0.9, 1.2, time_constant_s=TAU_S)

    bright_s = 0.1 + TAU_S * (1.0 - math.exp(-0.2 / TAU_S))
    assert mean_w == pytest.approx(POWER_W * bright_s / 0.3, rel=1e-6)


def test_readings_in_a_row_share_one_tail() -> None:
    edges = [1.02, 1.12, 1.22, 1.32, 1.42]
    apart = make_head(shutter=stepped(1.0))

    means = [apart.mean_w(a, b, time_constant_s=TAU_S) for a, b in pairwise(edges)]

    whole_w = make_head(shutter=stepped(1.0)).mean_w(1.02, 1.42, time_constant_s=TAU_S)
    assert sum(means) / 4 == pytest.approx(whole_w, rel=1e-9)
    assert means == sorted(means)


def test_a_pause_between_readings_changes_nothing() -> None:
    busy, lazy = make_head(shutter=stepped(1.0)), make_head(shutter=stepped(1.0))

    busy.mean_w(1.01, 1.02, time_constant_s=TAU_S)

    late = {"time_constant_s": TAU_S}
    assert busy.mean_w(1.1, 1.2, **late) == pytest.approx(lazy.mean_w(1.1, 1.2, **late), rel=1e-9)


def response(instant_s: float, *, omega: float) -> float:
    """Steady response of the lag to cos^2 of an angle that grows at a constant rate (deg/s).

    Source: cos^2 = (1 + cos 2x)/2, and the lag divides an oscillation by 1 + i w tau.
    """
    rate = 2.0 * math.radians(omega)
    swing = cmath.exp(1j * rate * instant_s) / (1.0 + 1j * rate * TAU_S)
    return POWER_W * 0.5 * (1.0 + swing.real)


@pytest.mark.parametrize("omega", [5.0, 40.0, 360.0])
def test_while_the_mount_turns_steadily_the_head_shows_the_lagged_oscillation(omega: float) -> None:
    dial = Trajectory(-100.0 * omega)
    dial.glide(-100.0, 100.0 * omega, 200.0)
    head = make_head(dial)

    mean_w = head.mean_w(0.3, 0.3001, time_constant_s=TAU_S)

    assert mean_w == pytest.approx(response(0.30005, omega=omega), abs=2e-6 * POWER_W)


def test_a_dwell_begun_while_the_mount_still_turns_is_not_what_it_is_at_rest() -> None:
    dial = Trajectory(0.0)
    ended_s = dial.move(0.0, 45.0, speed=20.0, acceleration=100.0)

    early_w = make_head(dial).mean_w(ended_s - 0.3, ended_s - 0.2, time_constant_s=TAU_S)
    late_w = make_head(dial).mean_w(ended_s + 30 * TAU_S, ended_s + 32 * TAU_S, time_constant_s=TAU_S)

    assert late_w == pytest.approx(POWER_W / 2, rel=1e-12)
    assert early_w > 1.05 * late_w


def test_after_a_move_the_tail_decays_with_the_time_constant() -> None:
    dial = Trajectory(0.0)
    ended_s = dial.move(0.0, 45.0, speed=20.0, acceleration=100.0)

    def left_w(wait_s: float) -> float:
        shown_w = make_head(dial).mean_w(ended_s + wait_s, ended_s + wait_s + 1e-6, time_constant_s=TAU_S)
        return shown_w - POWER_W / 2

    assert left_w(0.15) / left_w(0.05) == pytest.approx(math.exp(-0.1 / TAU_S), rel=1e-5)
    assert left_w(0.05) > 0.0


def test_a_move_agrees_with_an_integration_in_tiny_steps() -> None:
    dial = Trajectory(10.0)
    ended_s = dial.move(0.0, 70.0, speed=40.0, acceleration=200.0)
    step_s = 2e-5

    shown = POWER_W * math.cos(math.radians(10.0)) ** 2
    kept = math.exp(-step_s / TAU_S)
    for number in range(round(ended_s / step_s)):
        light = POWER_W * math.cos(math.radians(dial((number + 0.5) * step_s))) ** 2
        shown = light + (shown - light) * kept

    mean_w = make_head(dial).mean_w(ended_s, ended_s + 1e-7, time_constant_s=TAU_S)
    assert mean_w == pytest.approx(shown, abs=3e-6 * POWER_W)


def test_a_drifting_source_is_shown_late_by_one_time_constant() -> None:
    head = make_head(drift=3600.0)  # doubles every second: a ramp that shows

    mean_w = head.mean_w(10.0, 10.2, time_constant_s=TAU_S)

    assert mean_w == pytest.approx(POWER_W * (1.0 + 10.1 - TAU_S), rel=1e-12)


def test_drift_is_the_same_whether_something_moved_lately_or_not() -> None:
    settled = make_head(drift=3600.0)
    lately = make_head(Trajectory(0.0), shutter=stepped(10.0 - 20 * TAU_S), drift=3600.0)

    means = [head.mean_w(10.0, 10.2, time_constant_s=TAU_S) for head in (settled, lately)]

    assert means[0] == pytest.approx(means[1], rel=1e-7)


@settings(deadline=None)
@given(begin=st.floats(0.0, 5.0), reading=st.floats(1e-3, 1.0), target=st.floats(-180.0, 180.0))
def test_what_is_shown_never_leaves_the_span_of_the_light(begin: float, reading: float, target: float) -> None:
    dial = Trajectory(0.0)
    dial.move(0.5, target, speed=40.0, acceleration=200.0)

    mean_w = make_head(dial).mean_w(begin, begin + reading, time_constant_s=TAU_S)

    assert -1e-5 * POWER_W <= mean_w <= (1 + 1e-5) * POWER_W


def test_without_a_lag_a_reading_is_the_mean_of_the_light() -> None:
    dial = Trajectory(0.0)
    dial.glide(0.0, 90.0, 9.0)

    mean_w = make_head(dial).mean_w(0.0, 9.0, time_constant_s=0.0)

    assert mean_w == pytest.approx(POWER_W / 2, rel=1e-9)


def test_two_heads_that_read_at_the_same_time_see_the_same_noise() -> None:
    one, other = make_pair(noise=1e-2)

    levels = [head.mean_w(1.0, 1.1, time_constant_s=TAU_S) for head in (one, other)]

    assert levels[0] == pytest.approx(levels[1] - STRAY_W, rel=1e-12)
    assert levels[0] / POWER_W - 1.0 == pytest.approx(SourceNoise(1, 1e-2).mean(1.0, 1.1), rel=1e-9)


def test_heads_of_different_lag_see_the_same_noise_too() -> None:
    one, other = make_pair(noise=1e-2)

    slow_w = one.mean_w(1.0, 1.1, time_constant_s=0.5)

    assert slow_w == pytest.approx(other.mean_w(1.0, 1.1, time_constant_s=0.01) - STRAY_W, rel=1e-12)


def test_stray_light_is_not_the_source_s_and_has_none_of_its_noise() -> None:
    head = make_head(shutter=Trajectory(0.0), stray_w=STRAY_W, noise=1e-2)

    assert {head.mean_w(at_s, at_s + 0.1, time_constant_s=TAU_S) for at_s in (1.0, 2.0, 3.0)} == {STRAY_W}


def test_noise_stays_relative_while_something_moves() -> None:
    """The ratio to a silent source is that of the resting light, whatever turns meanwhile."""
    dials = [Trajectory(0.0), Trajectory(0.0)]
    for dial in dials:
        dial.glide(0.9, 30.0, 1.0)
    silent, noisy = (make_head(dial, noise=noise) for dial, noise in zip(dials, (0.0, 1e-2), strict=True))

    ratio = noisy.mean_w(1.0, 1.1, time_constant_s=TAU_S) / silent.mean_w(1.0, 1.1, time_constant_s=TAU_S)

    resting_w = make_head(noise=1e-2).mean_w(1.0, 1.1, time_constant_s=TAU_S)
    assert ratio == pytest.approx(resting_w / POWER_W, rel=1e-12)


def test_a_cap_takes_light_and_stray_light_away_and_gives_them_back() -> None:
    source = Source(Steady(POWER_W), 0.0, SourceNoise(1, 0.0))
    world = World(source, malus, Way({"analyser": Mount(Trajectory(0.0), 1.0)}))
    head = HeadInBeam(world, 0, stray_w=STRAY_W)

    world.cap_by_hand(True, 1.0)
    capped_w = head.mean_w(10.0, 10.1, time_constant_s=TAU_S)
    world.cap_by_hand(False, 20.0)

    assert capped_w == 0.0
    assert head.mean_w(30.0, 30.1, time_constant_s=TAU_S) == pytest.approx(POWER_W + STRAY_W, rel=1e-12)
