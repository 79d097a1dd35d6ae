"""What the recipe of a whole night becomes."""

import pytest
from full_cases import night

from rigctl.files.recipe import (
    Axis,
    Dark,
    OpticalElement,
    Order,
    Preparation,
    Role,
    Source,
    Steady,
)
from rigctl.quantities import Measured, parse_quantity

OVEN = "oven: {values: [22 degC, 25 degC, 28 degC], steady: {within: 0.05 K, for: 5 min, give up after: 40 min}}"
MOUNT = "part mount: {turn: 1, step: 5 deg, approach: from below, settle: 150 ms}"
SLOPE_K_PER_S = parse_quantity("0.01 K/min", "temperature slope")


def oven(written: str) -> Axis:
    """Return the first axis of the second step, which is written so."""
    return night({OVEN: written}).steps[1].sweep[0]


def added(written: str) -> Axis:
    """Return an axis that stands before the others of the second step."""
    return night({OVEN: f"{written}\n      - {OVEN}"}).steps[1].sweep[0]


def test_roles_of_every_kind_may_be_asked_for() -> None:
    assert night().roles["diode tec"] == Role("temperature controller")
    assert night().roles["monitor"] == Role("power meter", is_optional=True)


def test_the_source_tells_what_drives_and_what_cools_it() -> None:
    assert night().source == Source(Measured(785.2e-9, 0.3e-9), driven_by="diode", cooled_by="diode tec")


def test_a_pick_off_sends_a_fraction_to_its_power_meter() -> None:
    assert night().optics[1] == OpticalElement("pick-off", "pick-off", to="monitor", fraction=Measured(0.04))


def test_a_pick_off_may_have_a_name_and_an_unknown_fraction() -> None:
    part = night({"{to: monitor, fraction: 4 %}": "{name: glass, to: monitor, fraction: 4 %, unknown: fraction}"})

    assert (part.optics[1].name, part.optics[1].unknown) == ("glass", ("fraction",))


def test_a_warmed_retarder_has_a_coefficient_of_zero_from_25_degrees_on_unless_it_says_more() -> None:
    part = night().optics[2]

    assert (part.warmed_by, part.temperature_coefficient, part.reference_temperature_c) == (
        "oven",
        Measured(0.0),
        25.0,
    )


def test_a_warmed_retarder_may_say_how_it_goes_with_the_temperature() -> None:
    said = "retardance: 0.5 waves, temperature coefficient: -100 ppm/K +- 50 ppm/K, reference temperature: 295.15 K"

    part = night({"retardance: 0.5 waves": said}).optics[2]

    assert part.temperature_coefficient is not None
    assert part.temperature_coefficient.value == pytest.approx(-1e-4)
    assert part.reference_temperature_c == 22.0


def test_an_element_that_nothing_warms_has_no_coefficient() -> None:
    part = night().optics[3]

    assert (part.warmed_by, part.temperature_coefficient, part.reference_temperature_c) == (None, None, None)


@pytest.mark.parametrize(
    ("role", "written", "taken_out"),
    [
        ("flip: slide", "flip", ("flip", None, None)),
        ("flip: {is: slide, optional: true}", "flip", ("flip", None, None)),
        ("flip: rotation stage", "{flip: {in: 0 deg, out: 90 deg}}", ("flip", 0.0, 90.0)),
    ],
)
def test_a_slide_or_a_mount_may_take_an_element_out(
    role: str, written: str, taken_out: tuple[str, float | None, float | None]
) -> None:
    part = night({"roles:\n": f"roles:\n  {role}\n", "name: part,": f"name: part, taken out by: {written},"}).optics[2]

    assert (part.taken_out_by, part.in_deg, part.out_deg) == taken_out


def test_a_quantity_may_be_found_anew_at_each_level_or_in_each_step() -> None:
    part = night({"name: part,": "name: part, each: {retardance: oven, dial offset: step},"}).optics[2]

    assert part.each == {"retardance": "oven", "dial offset": "step"}


def test_preparations_keep_their_order() -> None:
    assert night().preparations == (
        Preparation("diode tec", 24.0, steady=Steady(0.02, 60.0, 900.0, slope_k_per_s=SLOPE_K_PER_S)),
        Preparation("diode", 0.034, ramp_a_per_s=0.005, warm_up_s=600.0),
    )


def test_a_sweep_may_set_temperatures_before_it_turns_a_mount() -> None:
    plant, mount = night().steps[1].sweep

    assert plant == Axis("oven", "temperature", (22.0, 25.0, 28.0), steady=Steady(0.05, 300.0, 2400.0))
    assert (mount.role, mount.kind, len(mount.values), mount.approach) == ("part mount", "angle", 72, "from below")


@pytest.mark.parametrize(
    ("written", "values"),
    [
        ("oven: {range: 20 to 24 degC, step: 2 K}", (20.0, 22.0, 24.0)),
        ("oven: {range: 20 degC to 24 degC, step: 2 K, there and back: true}", (20.0, 22.0, 24.0, 22.0, 20.0)),
        ("oven: {values: [295.15 K, 20 degC]}", (22.0, 20.0)),
        (
            "oven: {segments: [{range: 20 to 22 degC, step: 1 K}, {range: 22 to 30 degC, step: 4 K}]}",
            (20.0, 21.0, 22.0, 26.0, 30.0),
        ),
        (
            "oven: {segments: [{values: [20 degC, 21 degC], there and back: yes}, {values: [30 degC]}]}",
            (20.0, 21.0, 20.0, 30.0),
        ),
    ],
)
def test_temperatures_may_be_written_in_many_ways(written: str, values: tuple[float, ...]) -> None:
    assert oven(written).values == values


def test_a_current_may_be_swept_up_and_down_by_a_ramp() -> None:
    written = "diode: {range: 0 mA to 3 mA, step: 1 mA, there and back: true, ramp: 1 mA/s}"

    assert added(written) == Axis("diode", "current", (0.0, 0.001, 0.002, 0.003, 0.002, 0.001, 0.0), ramp_a_per_s=0.001)


@pytest.mark.parametrize("count", [1, 2, 3, 1000])
def test_repeats_count_from_one_and_set_nothing(count: int) -> None:
    assert added(f"repeat: {count}") == Axis("", "repeat", tuple(float(n) for n in range(1, count + 1)))


def test_a_step_may_have_a_million_visits() -> None:
    step = night(
        {"[{part mount: {turn: 1, step: 10 deg}}]": "[{repeat: 10000}, {oven: {range: 20 to 29.9 degC, step: 0.1 K}}]"}
    ).steps[0]

    assert [len(axis.values) for axis in step.sweep] == [10000, 100]


def test_a_turn_may_go_there_and_back() -> None:
    mount = night({MOUNT: "part mount: {turn: 1, step: 90 deg, there and back: true}"}).steps[1].sweep[1]

    assert mount.values == (0.0, 90.0, 180.0, 270.0, 180.0, 90.0, 0.0)


@pytest.mark.parametrize(
    ("written", "order"),
    [
        ("interleaved 3", Order("interleaved", 3)),
        ("shuffled 7", Order("shuffled", 7)),
        ("shuffled 0", Order("shuffled", 0)),
        ("as written", Order("as written")),
    ],
)
def test_a_step_has_an_order(written: str, order: Order) -> None:
    assert night({"interleaved 3": written}).steps[1].order == order


def test_a_step_that_says_no_more_is_visited_as_written_and_waits_for_a_person() -> None:
    step = night().steps[0]

    assert (step.order, step.goes_on_unattended) == (Order("as written"), False)


def test_elements_may_be_out_of_the_beam_in_a_step() -> None:
    both = night({"without: part": "without: [part, exit cube]\n    unattended: go on"}).steps

    assert (night().steps[0].without, night().steps[1].without) == (("part",), ())
    assert (both[0].without, both[0].goes_on_unattended) == (("part", "exit cube"), True)


def test_a_step_without_an_element_may_leave_its_mount_alone() -> None:
    step = night({"sweep: [{part mount: {turn: 1, step: 10 deg}}]": "sweep: [{repeat: 5}]"}).steps[0]

    assert [one.kind for one in step.sweep] == ["repeat"]


def test_a_dark_may_be_taken_again_and_again() -> None:
    assert night().darks == (Dark("dark", "shutter", before=True, after=True, every_s=3600.0),)


def test_darks_backgrounds_and_zeros_are_three_things() -> None:
    more = "background: {after: no}\nzero: {before: true, after: false}\ntolerance:"

    assert night({"tolerance:": more}).darks[1:] == (
        Dark("background", "", before=True, after=False),
        Dark("zero", "hand", before=True, after=False),
    )


def test_a_background_every_hour_needs_none_before_or_after() -> None:
    every = night({"tolerance:": "background: {before: no, after: no, every: 1 h}\ntolerance:"}).darks[1]

    assert every == Dark("background", "", before=False, after=False, every_s=3600.0)


def test_tolerances_and_wanted_uncertainties_are_by_address() -> None:
    recipe = night()

    assert recipe.tolerances == {"part.retardance": (0.49, 0.51)}
    assert recipe.targets == {"part.retardance": 0.002}


def test_tolerances_may_be_in_nanometres_and_targets_in_percent() -> None:
    recipe = night(
        {
            "0.49 to 0.51 waves": "385 nm to 400 nm",
            "{part.retardance: 0.002 waves}": "{exit cube.extinction ratio: 20 %, part.dial offset: 6 arcmin}",
        }
    )

    assert recipe.tolerances["part.retardance"] == pytest.approx((385 / 785.2, 400 / 785.2))
    assert recipe.targets == pytest.approx({"exit cube.extinction ratio": 2e-4, "part.dial offset": 0.1})
