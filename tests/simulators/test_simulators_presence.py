"""What stands in the beam: slides, mounts that flip an element out, and hands."""

import pytest

from rigctl_sim.presence import ALL_IN, HAND_S, Carried, Flipped, Presence
from rigctl_sim.trajectory import Trajectory

PART, PLATE = frozenset({"part"}), frozenset({"plate"})


@pytest.fixture
def slide() -> Trajectory:
    return Trajectory(1.0)


@pytest.fixture
def presence(slide: Trajectory) -> Presence:
    return Presence({"part": Carried(slide)})


def test_at_first_everything_is_in(presence: Presence) -> None:
    assert presence.absent(0.0) == ALL_IN


def test_a_slide_takes_its_element_out_and_puts_it_back(presence: Presence, slide: Trajectory) -> None:
    slide.glide(1.0, 0.0, 0.5)
    slide.glide(10.0, 1.0, 0.5)

    assert [presence.absent(instant) for instant in (1.0, 2.0, 20.0)] == [ALL_IN, {PART: 1.0}, ALL_IN]


def test_a_slide_on_its_way_lets_a_part_of_the_beam_pass_beside(presence: Presence, slide: Trajectory) -> None:
    slide.glide(1.0, 0.0, 0.5)

    found = presence.absent(1.1)

    assert found[PART] == pytest.approx(0.2)
    assert found[frozenset()] == pytest.approx(0.8)


def test_a_hand_takes_out_any_element() -> None:
    presence = Presence({})

    presence.take_out_by_hand("plate", True, 1.0)
    presence.take_out_by_hand("plate", False, 10.0)

    assert [presence.absent(instant) for instant in (1.0, 1.0 + HAND_S, 11.0)] == [ALL_IN, {PLATE: 1.0}, ALL_IN]


def test_an_element_on_a_slide_can_also_be_taken_out_by_hand(presence: Presence, slide: Trajectory) -> None:
    presence.take_out_by_hand("part", True, 1.0)
    slide.glide(2.0, 0.0, 0.5)
    presence.take_out_by_hand("part", False, 4.0)

    assert [presence.absent(instant) for instant in (1.5, 3.0, 5.0)] == [{PART: 1.0}] * 3


def test_two_elements_can_be_out_at_once(presence: Presence, slide: Trajectory) -> None:
    slide.glide(1.0, 0.0, 0.5)
    presence.take_out_by_hand("plate", True, 1.0)

    assert presence.absent(5.0) == {PART | PLATE: 1.0}


def test_parts_of_the_beam_add_up_to_all_of_it(presence: Presence, slide: Trajectory) -> None:
    slide.glide(1.0, 0.0, HAND_S)
    presence.take_out_by_hand("plate", True, 1.0)

    found = presence.absent(1.0 + 0.3 * HAND_S)

    expected = {frozenset[str](): 0.49, PART: 0.21, PLATE: 0.21, PART | PLATE: 0.09}
    assert found == pytest.approx(expected)
    assert sum(found.values()) == pytest.approx(1.0)


@pytest.mark.parametrize("sense", [1.0, -1.0])
@pytest.mark.parametrize(
    ("bench_deg", "part_in"),
    [
        (0.0, 1.0),
        (0.001, 1.0),
        (22.5, 1.0),
        (45.0, 0.5),
        (67.5, 0.0),
        (89.999, 0.0),
        (90.0, 0.0),
        (-5.0, 1.0),
        (95.0, 0.0),
    ],
)
def test_a_mount_flips_an_element_out(sense: float, bench_deg: float, part_in: float) -> None:
    flipped = Flipped(Trajectory(sense * bench_deg), sense, in_deg=0.0, out_deg=90.0)

    assert flipped.part_in(0.0) == pytest.approx(part_in)


def test_a_mount_may_flip_it_out_backwards() -> None:
    flipped = Flipped(Trajectory(-60.0), 1.0, in_deg=30.0, out_deg=-60.0)

    assert flipped.part_in(0.0) == 0.0


def test_what_moves_with_the_elements_is_told(presence: Presence, slide: Trajectory) -> None:
    dial = Trajectory(0.0)
    both = Presence({"part": Carried(slide), "plate": Flipped(dial, 1.0, 0.0, 90.0)})
    assert both.moving() == (slide, dial)

    both.take_out_by_hand("part", True, 1.0)

    assert len(both.moving()) == 3
