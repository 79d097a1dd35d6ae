"""Light as a function of time: what turns, what blocks, and a source that drifts."""

import math
from collections.abc import Mapping
from itertools import pairwise

import pytest

from rigctl_sim.light_source import Source, Steady
from rigctl_sim.plant import Plant, PlantMake
from rigctl_sim.presence import Carried, Presence
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
    assert make_world().is_at_rest(-math.inf)


def test_everything_rests_when_the_last_has_come_to_rest() -> None:
    dial, shutter = Trajectory(0.0), Trajectory(0.0)
    dial.glide(0.0, 5.0, 3.0)
    shutter.glide(1.0, 1.0, 0.02)

    world = make_world(dial, shutter)
    assert [world.is_at_rest(since) for since in (-math.inf, 2.999, 3.0, 4.0)] == [False, False, True, True]


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


Asked = tuple[float, float, frozenset[str]]


class Asking:
    """A reader that passes everything on, but less by a tenth for each kelvin above 22 and all without the plate."""

    def __init__(self) -> None:
        self.asked: list[Asked] = []

    def __call__(
        self, _angles: Mapping[str, float], power_w: float, temperatures: Mapping[str, float], absent: frozenset[str]
    ) -> tuple[float]:
        self.asked.append((power_w, temperatures.get("oven", 22.0), absent))
        factor = 1.0 if "plate" in absent else 0.5 - 0.1 * (temperatures.get("oven", 22.0) - 22.0)
        return (factor * power_w,)


def make_oven() -> Plant:
    return Plant(PlantMake(22.0, time_constant_s=4.0, slew_k_per_s=0.2, idle_time_constant_s=60.0))


def test_the_light_follows_the_temperature_of_an_element() -> None:
    oven = make_oven()
    world = World(make_source(), Asking(), Way(plants={"oven": oven}))
    oven.regulate(10.0, 24.0)

    levels = [world.light_w(instant)[0] for instant in (5.0, 12.0, 1000.0)]

    assert levels == pytest.approx([0.5 * POWER_W, (0.5 - 0.1 * 0.4) * POWER_W, 0.3 * POWER_W], rel=1e-9)


def test_temperatures_are_too_slow_to_cut_time_by() -> None:
    oven = make_oven()
    world = World(make_source(), Asking(), Way(plants={"oven": oven}))

    oven.regulate(10.0, 24.0)

    assert world.is_at_rest(-math.inf)
    assert list(world.pieces(10.0, 20.0)) == [(10.0, 20.0)]


def test_a_temperature_at_rest_is_worked_out_once() -> None:
    reader, oven = Asking(), make_oven()
    world = World(make_source(), reader, Way(plants={"oven": oven}))
    oven.regulate(10.0, 24.0)

    for instant in range(1000, 1010):
        world.light_w(float(instant))

    assert len(reader.asked) == 1


def test_an_element_half_in_the_beam_gets_half_of_it() -> None:
    slide = Trajectory(1.0)
    world = World(make_source(), Asking(), Way(presence=Presence({"plate": Carried(slide)})))
    slide.glide(1.0, 0.0, 0.5)

    levels = [world.light_w(instant)[0] for instant in (0.5, 1.25, 2.0)]

    assert levels == pytest.approx([0.5 * POWER_W, 0.75 * POWER_W, POWER_W], rel=1e-12)


def test_what_a_hand_takes_out_moves_like_anything_else() -> None:
    world = World(make_source(), Asking(), Way())
    was_at_rest = world.is_at_rest(5.0)

    world.take_out_by_hand("plate", True, 5.0)

    assert [was_at_rest, world.is_at_rest(5.0), world.is_at_rest(5.1)] == [True, False, True]
    assert [world.light_w(instant)[0] for instant in (4.0, 6.0)] == [0.5 * POWER_W, POWER_W]


def test_every_detector_gets_what_was_worked_out_for_the_first() -> None:
    reader = Asking()
    dial = Trajectory(0.0)
    world = World(make_source(), reader, Way({"analyser": Mount(dial, 1.0)}))
    dial.glide(0.0, 45.0, 3.0)

    first = world.course(0.0, 2.0)
    asked = len(reader.asked)

    assert world.course(0.0, 2.0) == first
    assert len(reader.asked) == asked > 0


def test_a_course_is_whole() -> None:
    dial = Trajectory(0.0)
    dial.glide(0.0, 45.0, 3.0)

    course = make_world(dial).course(-1.0, 5.0)

    assert sum(duration for duration, *_ in course) == pytest.approx(6.0)
    assert all(end == begin for (*_, end), (_, begin, *_) in pairwise(course))


def test_the_past_is_remembered_even_when_much_of_it_is_asked_for() -> None:
    dial = Trajectory(0.0)
    dial.glide(0.0, 90.0, 900.0)
    world = make_world(dial)
    instants = [float(instant) for instant in range(900)]
    first = [world.light_w(instant)[0] for instant in instants]

    again = [world.light_w(instant)[0] for instant in instants]

    assert again == first
    assert first[450] == pytest.approx(0.5 * POWER_W, rel=1e-12)


def test_a_world_in_which_nothing_can_move_is_at_rest() -> None:
    world = World(make_source(), Asking(), Way())

    assert world.is_at_rest(-math.inf)
    assert world.light_w(3.0)[0] == 0.5 * POWER_W


def test_the_source_s_noise_is_that_of_all_detectors() -> None:
    noise = SourceNoise(1, 1e-2)
    world = World(Source(Steady(POWER_W), 0.0, noise), malus, Way({"analyser": Mount(Trajectory(0.0), 1.0)}))

    assert world.flicker(1.0, 1.1) == noise.mean(1.0, 1.1) != 0.0
    assert world.light_w(1.05)[0] == POWER_W
