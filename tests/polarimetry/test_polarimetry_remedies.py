"""What is offered when a sweep does not tell enough: which sentences, in which order, and which visits they mean."""

from dataclasses import replace

import numpy as np
import pytest
from polarimetry_cases import (
    RANGES,
    at_ovens,
    empty_pair_case,
    plate_case,
    polarizer_case,
    quantity,
    sweep,
    train_of,
    variances,
    warm_case,
    without,
)

from rigctl.optics import Element, Levels, Train, Visits
from rigctl.polarimetry import Coupling, predict
from rigctl.polarimetry.arranging import arranged
from rigctl.polarimetry.coordinates import in_fit_forms
from rigctl.polarimetry.problem import Problem
from rigctl.polarimetry.remedies import remedies


def problem_of(train: Train, visits: Visits) -> Problem:
    told = arranged(train, visits, ["signal"])
    level_w = {"signal": np.zeros(visits.count)}
    weight = {"signal": np.where(visits.is_open, 1e7, 2e7)}
    return Problem(told, in_fit_forms(told, visits), visits, level_w, weight)


def offered(train: Train, visits: Visits, others: tuple[str, ...] = ()) -> dict[str, Visits]:
    """The visits that each sentence adds."""
    problem = problem_of(train, visits)
    found = remedies(problem, problem.nominal, others)
    return {
        remedy.sentence: remedy.problem.visits.rows(np.arange(visits.count, remedy.problem.visits.count))
        for remedy in found
    }


def two_mounts() -> tuple[Train, Visits]:
    train = train_of(
        Element("entry cube", "polarizer"),
        Element("part", "retarder", "part mount"),
        Element("exit cube", "polarizer", "exit mount"),
        given=(quantity("part.retardance", 0.25, is_unknown=True), quantity("part.dial offset", 0.0, is_unknown=True)),
    )
    visits = sweep()
    return train, replace(visits, angle_deg={**visits.angle_deg, "exit mount": np.full(visits.count, 20.0)})


def test_the_most_practical_comes_first_and_knowing_better_last() -> None:
    train, visits = two_mounts()

    sentences = list(offered(train, visits.rows(visits.is_open), ("source.power",)))

    assert sentences == [
        "Add 10 readings with the beam blocked.",
        "Repeat the sweep with part mount 45 deg further.",
        "Repeat the sweep with part mount 90 deg further.",
        "Add a sweep over a full turn of exit mount.",
        "Add 10 readings with part out of the beam.",
        "Add a sweep over a full turn of exit mount with part out of the beam.",
        "Measure source.power apart and state it with its tolerance in the recipe.",
    ]


def test_a_turn_of_a_mount_is_36_open_visits_with_the_others_as_they_stood() -> None:
    train, visits = two_mounts()

    turn = offered(train, visits)["Add a sweep over a full turn of exit mount."]

    assert np.array_equal(turn.angle_deg["exit mount"], np.arange(0.0, 360.0, 10.0))
    assert np.ptp(turn.angle_deg["part mount"]) == 0.0
    assert turn.is_open.all()
    assert np.all(turn.time_h == np.median(visits.time_h))


def test_a_turn_without_the_part_is_without_it() -> None:
    train, visits = two_mounts()

    turn = offered(train, visits)["Add a sweep over a full turn of exit mount with part out of the beam."]

    assert not turn.present["part"].any()
    assert np.ptp(turn.angle_deg["exit mount"]) == 350.0


def test_its_own_mount_is_not_turned_while_a_part_is_out() -> None:
    sentences = offered(plate_case(), sweep())

    assert "Add 10 readings with part out of the beam." in sentences
    assert not [s for s in sentences if "turn of part mount with part out" in s]


def test_a_mount_that_turns_something_else_too_is_turned_while_the_part_is_out() -> None:
    train = train_of(
        Element("part", "retarder", "part mount"),
        Element("exit cube", "polarizer", "part mount"),
        given=(quantity("part.retardance", 0.25, is_unknown=True),),
    )

    assert "Add a sweep over a full turn of part mount with part out of the beam." in offered(train, sweep())


def test_only_the_part_under_test_and_what_was_out_before_are_taken_out() -> None:
    plain, visits = offered(plate_case(), sweep()), sweep()
    moved = offered(plate_case(), replace(visits, present={"exit cube": np.ones(visits.count, dtype=bool)}))

    assert [s for s in plain if "out of the beam" in s] == ["Add 10 readings with part out of the beam."]
    assert [s for s in moved if "out of the beam" in s] == [
        "Add 10 readings with part out of the beam.",
        "Add 10 readings with exit cube out of the beam.",
        "Add a sweep over a full turn of part mount with exit cube out of the beam.",
    ]


def test_a_mount_that_moved_only_while_the_beam_was_blocked_has_not_turned() -> None:
    train, visits = two_mounts()
    shaken = {**visits.angle_deg, "exit mount": np.where(visits.is_open, 20.0, 0.0)}

    assert "Add a sweep over a full turn of exit mount." in offered(train, replace(visits, angle_deg=shaken))


def test_further_visits_show_everything_in_the_beam() -> None:
    train, visits = two_mounts()
    first_out = replace(visits, present={"part": np.arange(visits.count) > 40})

    turn = offered(train, first_out)["Add a sweep over a full turn of exit mount."]

    assert turn.present["part"].all()
    assert np.all(turn.angle_deg["part mount"] == visits.angle_deg["part mount"][41])


def test_darks_are_asked_for_on_the_ranges_that_have_none() -> None:
    visits = sweep()
    index = np.where(visits.is_open, np.arange(visits.count) % 2, 0).astype(np.intp)
    on_two = replace(visits, levels={"range of signal": Levels(RANGES, index)})

    dark = offered(polarizer_case(), on_two)["Add 10 readings with the beam blocked on each range."]

    assert not dark.is_open.any()
    assert set(dark.levels["range of signal"].index) == {1}
    assert dark.count == 10


def test_with_darks_there_is_nothing_to_block() -> None:
    assert not [s for s in offered(polarizer_case(), sweep()) if "blocked" in s]


def test_a_level_without_visits_is_offered_and_one_with_them_is_not() -> None:
    train = plate_case()
    apart = train.rewritten(replace(train.quantities["part.retardance"], each="oven"))
    whole = at_ovens(sweep(), 22.0, 25.0, 28.0)

    missing = offered(apart, whole.rows(whole.levels["oven"].index != 1))
    complete = offered(apart, whole)

    assert set(missing["Repeat the sweep where oven is 25 degC."].levels["oven"].index) == {1}
    assert not [s for s in complete if "where oven is" in s]


def test_levels_that_nothing_depends_on_are_not_offered() -> None:
    whole = at_ovens(sweep(), 22.0, 25.0)

    assert not [s for s in offered(plate_case(), whole.rows(whole.levels["oven"].index == 0)) if "where oven is" in s]


def test_warmer_is_offered_where_it_was_always_as_warm() -> None:
    steady, changing = (
        offered(warm_case(), at_ovens(sweep(), 25.0)),
        offered(warm_case(), at_ovens(sweep(), 25.0, 30.0)),
    )

    assert np.all(steady["Repeat the sweep with oven 5 K warmer."].temperature_c["oven"] == 30.0)
    assert not [s for s in changing if "warmer" in s]


def test_to_know_a_quantity_better_adds_no_visit() -> None:
    problem = problem_of(plate_case(), sweep())
    *_, last = remedies(problem, problem.nominal, ["source.power"])

    assert last.problem.visits.count == problem.visits.count
    assert last.problem.train.quantities["source.power"].prior_u is not None


def test_further_readings_weigh_as_much_as_a_usual_one() -> None:
    problem = problem_of(plate_case(), sweep())

    first = next(iter(remedies(problem, problem.nominal, [])))

    assert np.all(first.problem.weight["signal"][problem.visits.count :] == 1e7)
    assert np.array_equal(first.problem.weight["signal"][: problem.visits.count], problem.weight["signal"])


def coupled(train: Train, visits: Visits) -> Coupling:
    (coupling,) = predict(train, visits, variances(visits)).couplings
    return coupling


def test_a_blurred_unknown_comes_with_its_remedy() -> None:
    # The analyser's zero has a tolerance: the offset of a half-wave plate is found only as well as half of that.
    train, visits = two_mounts()
    blurred = train.rewritten(quantity("exit cube.dial offset", 1.0, 0.5), quantity("part.retardance", 0.5))

    coupling = coupled(blurred, visits)

    assert coupling.name == "part.dial offset"
    assert coupling.remedy == "Add 10 readings with part out of the beam."  # the analyser stands at 20 deg
    assert coupling.u_with_remedy is not None
    assert coupling.u_if_others_known <= coupling.u_with_remedy < coupling.u / 3.0


def test_an_unknown_that_nothing_helps_has_no_remedy() -> None:
    coupling = Coupling("part.retardance", 0.1, 0.001, "source.power")

    assert (coupling.remedy, coupling.u_with_remedy) == ("", None)


@pytest.mark.parametrize("name", ["part.dial offset", "exit cube.axis"])
def test_after_its_remedy_nothing_is_refused(name: str) -> None:
    train, visits = empty_pair_case(), sweep()
    few = without(visits.rows(np.full(10, 6)), "part")

    before = {n for refusal in predict(train, visits, variances(visits)).refusals for n in refusal.names}
    cured = Visits.join(visits, few)
    after = {n for refusal in predict(train, cured, variances(cured)).refusals for n in refusal.names}

    assert name in before
    assert name not in after
