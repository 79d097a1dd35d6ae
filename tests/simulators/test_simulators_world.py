"""Light as a function of time: what turns, what blocks, and a source that drifts."""

import math
from collections.abc import Mapping
from itertools import pairwise

import pytest

from rigctl_sim.light_source import Source, Steady
from rigctl_sim.source_noise import SourceNoise
from rigctl_sim.trajectory import Trajectory
from rigctl_sim.world import STEP_DEG, Mount, Way, World

POWER_W = 2e-3


def malus(
    angles: Mapping[str, float], power_w: float, _temperatures: Mapping[str, float], _absent: frozenset[str]
) -> tuple[float, float]:
    """A crossed pair of detectors behind one turning polarizer."""
    cosine = math.cos(math.radians(angles["analyser"]))
    return power_w * cosine**2, power_w * (1.0 - cosine**2)


def make_source(drift_per_h: float = 0.0) -> Source:
    return Source(Steady(POWER_W), drift_per_h, SourceNoise(1, 0.0))


def make_world(
    dial: Trajectory | None = None,
    shutter: Trajectory | None = None,
    *,
    sense: float = 1.0,
    drift: float = 0.0,
) -> World:
    mounts = {"analyser": Mount(dial or Trajectory(0.0), sense)}
    shutters = [] if shutter is None else [shutter]
    return World(make_source(drift), malus, Way(mounts, shutters))


def test_the_light_follows_the_dial() -> None:
    dial = Trajectory(0.0)
    dial.glide(1.0, 90.0, 9.0)
    world = make_world(dial)

    assert world.light_w(0.0)[0] == POWER_W
    assert world.light_w(1.0 + 4.5)[0] == pytest.approx(POWER_W / 2, rel=1e-12)
    assert world.light_w(100.0)[0] == pytest.approx(0.0, abs=1e-18)


def test_each_detector_has_its_own_light() -> None:
    world = make_world(Trajectory(30.0))

    light = [world.light_w(0.0)[detector] for detector in (0, 1)]

    assert light == pytest.approx([0.75 * POWER_W, 0.25 * POWER_W], rel=1e-12)


def test_a_mount_that_counts_the_other_way_turns_the_other_way() -> None:
    seen: list[float] = []

    def reader(
        angles: Mapping[str, float], power_w: float, _temperatures: Mapping[str, float], _absent: frozenset[str]
    ) -> tuple[float]:
        seen.append(angles["analyser"])
        return (power_w,)

    mounts = {"analyser": Mount(Trajectory(30.0), -1.0)}
    World(make_source(), reader, Way(mounts)).light_w(0.0)

    assert seen == [-30.0]


def test_the_source_drifts_in_proportion_to_the_time() -> None:
    world = make_world(drift=0.01)

    assert world.light_w(0.0)[0] == POWER_W
    assert world.light_w(7200.0)[0] == pytest.approx(1.02 * POWER_W, rel=1e-12)


def test_a_closed_shutter_leaves_nothing() -> None:
    world = make_world(shutter=Trajectory(0.0))

    assert world.light_w(5.0)[0] == 0.0


def test_a_shutter_on_its_way_lets_a_part_through() -> None:
    shutter = Trajectory(0.0)
    shutter.glide(1.0, 1.0, 0.02)
    world = make_world(shutter=shutter)

    assert world.light_w(1.005)[0] == pytest.approx(0.25 * POWER_W, rel=1e-9)


def test_a_hand_blocks_the_beam_and_gives_it_back() -> None:
    world = make_world()
    bright = world.light_w(1.0)[0]

    world.block_by_hand(True, 1.0)
    dark = world.light_w(2.0)[0]
    world.block_by_hand(False, 2.0)

    assert dark == 0.0
    assert world.light_w(3.0)[0] == bright


def test_the_past_stays_as_it_was_when_something_moves_later() -> None:
    dial = Trajectory(0.0)
    world = make_world(dial)
    before = world.light_w(1.0)[0]

    dial.glide(2.0, 90.0, 1.0)
    world.light_w(10.0)

    assert world.light_w(1.0)[0] == before


def test_light_at_rest_is_worked_out_once() -> None:
    calls: list[float] = []

    def reader(
        angles: Mapping[str, float], power_w: float, _temperatures: Mapping[str, float], _absent: frozenset[str]
    ) -> tuple[float]:
        calls.append(power_w)
        return (power_w,)

    dial = Trajectory(0.0)
    mounts = {"analyser": Mount(dial, 1.0)}
    world = World(make_source(), reader, Way(mounts))

    for instant in range(10):
        world.light_w(float(instant))
    assert len(calls) == 1
    dial.glide(10.0, 5.0, 1.0)
    world.light_w(20.0)
    assert len(calls) == 2


def test_nothing_moves_before_somebody_moves_it() -> None:
    assert make_world().rests_from_s() == -math.inf


def test_everything_rests_when_the_last_has_come_to_rest() -> None:
    dial, shutter = Trajectory(0.0), Trajectory(0.0)
    dial.glide(0.0, 5.0, 3.0)
    shutter.glide(1.0, 1.0, 0.02)

    assert make_world(dial, shutter).rests_from_s() == 3.0


def test_time_is_cut_at_every_knot_and_into_small_turns() -> None:
    dial, shutter = Trajectory(0.0), Trajectory(0.0)
    dial.move(0.0, 45.0, speed=20.0, acceleration=100.0)
    shutter.glide(1.0, 1.0, 0.02)
    world = make_world(dial, shutter)

    pieces = list(world.pieces(-1.0, 4.0))

    edges = {edge for piece in pieces for edge in piece}
    assert edges >= {-1.0, 0.0, 1.0, 1.02, 4.0, dial.rests_from_s}
    assert all(end == begin for (_, end), (begin, _) in pairwise(pieces))
    assert max(abs(dial(end) - dial(begin)) for begin, end in pieces) <= 2 * STEP_DEG


def test_time_at_rest_is_one_piece() -> None:
    assert list(make_world().pieces(0.0, 10.0)) == [(0.0, 10.0)]
