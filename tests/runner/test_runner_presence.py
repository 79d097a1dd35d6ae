"""Elements in and out of the beam: by a slide, by a second mount, by somebody's hands, and with nobody there."""

from dataclasses import dataclass, field, replace
from pathlib import Path

import numpy as np
import pytest
from night_cases import ALONE, BENCH, HEAD, NIGHT, NO_SLIDE, RACK, STEPS, Wire, make_night, night

from rigctl.errors import PlanError
from rigctl.estimates import fit_run, run_data
from rigctl.record import load_run
from rigctl.record.run import Run
from rigctl.runner.person import NobodyThere, Person
from rigctl.runner.run import run_job

AGAIN = STEPS + "  - {name: empty again, without: part, sweep: [{repeat: 2}]}\n"
GOES_ON = AGAIN.replace("without: part", "without: part, unattended: go on")
FLIPPED = NIGHT.replace("part slide: {is: slide, optional: true}", "flip mount: rotation stage").replace(
    "taken out by: part slide", "taken out by: {flip mount: {in: 20 deg, out: 110 deg}}"
)
FLIP_BENCH = NO_SLIDE.replace(
    "  head 1:", "  mount 2: {driver: gcode-rotary, at: tcp://127.0.0.1:5008}\n  head 1:"
).replace("  signal: head 1", "  flip mount: mount 2\n  signal: head 1")


def levels(run: Run, step: str) -> list[float]:
    return [float(np.mean(visit.dwells["signal"].levels_w)) for visit in run.visits(step)]


def assert_empty_is_brightest(run: Run, *steps: str) -> None:
    """Between parallel polarizers a quarter-wave plate takes up to half of the light, by its angle."""
    for step in steps:
        assert min(levels(run, step)) > 0.98 * max(levels(run, "plate"))
        assert {visit.present["part"] for visit in run.visits(step)} == {False}
    assert min(levels(run, "plate")) < 0.6 * max(levels(run, "plate"))
    assert {visit.present["part"] for visit in run.visits("plate")} == {True}


def test_a_slide_takes_the_part_out_and_puts_it_back_before_the_light_is_let_in(tmp_path: Path) -> None:
    wire = Wire()

    assert run_job(make_night(tmp_path / "run.h5", night(AGAIN), wire=wire)).exit_code == 0

    run = load_run(tmp_path / "run.h5")
    assert_empty_is_brightest(run, "empty", "empty again")
    assert all(visit.is_confirmed for step in ("empty", "plate", "empty again") for visit in run.visits(step))
    told = [
        said.text.split(";")[0] for said in wire.said if "(@4);" in said.text and "?" not in said.text.split(";")[0]
    ]
    assert told == ["ROUTE:CLOSE (@4)", "ROUTE:OPEN (@4)", "ROUTE:CLOSE (@4)"]


def test_the_shutter_is_closed_while_the_slide_moves(tmp_path: Path) -> None:
    wire = Wire()

    run_job(make_night(tmp_path / "run.h5", night(AGAIN), wire=wire))

    shutter: list[str] = []
    for said in wire.said:
        words = said.text.split(";")[0]
        if words in ("ROUTE:OPEN (@3)", "ROUTE:CLOSE (@3)"):
            shutter.append(words)
        if words in ("ROUTE:OPEN (@4)", "ROUTE:CLOSE (@4)"):
            assert shutter[-1] == "ROUTE:OPEN (@3)"


def test_a_slide_that_was_left_out_is_put_in_for_the_first_step_that_wants_its_element(tmp_path: Path) -> None:
    """As an interrupted run leaves it: what a slide holds is never taken for granted."""
    steps = STEPS.replace("  - {name: empty, without: part, sweep: [{repeat: 3}]}\n", "")
    steps += "  - {name: empty, without: part, sweep: [{repeat: 2}]}\n"
    job = make_night(tmp_path / "run.h5", night(steps))
    channel = job.open_channel(RACK, job.drivers["scpi-slide"].family.opening)
    channel.write(b"ROUTE:CLOSE (@4)\n", 1.0)
    channel.close()

    assert run_job(job).exit_code == 0

    assert_empty_is_brightest(load_run(tmp_path / "run.h5"), "empty")


def test_a_second_mount_turns_the_part_out_and_back(tmp_path: Path) -> None:
    wire = Wire()

    assert run_job(make_night(tmp_path / "run.h5", FLIPPED, FLIP_BENCH, wire=wire)).exit_code == 0

    assert_empty_is_brightest(load_run(tmp_path / "run.h5"), "empty")
    moves = [said.text for said in wire.said if said.address.endswith("5008") and "G0" in said.text]
    assert moves == ["G90 G53 G0 A110.000", "G90 G53 G0 A20.000"]


@dataclass
class Hands(NobodyThere):
    """Somebody who does what is asked through another person, and keeps it."""

    other: Person
    is_there: bool = True
    asked: list[str] = field(default_factory=list)

    def take_out(self, element: str) -> None:
        self.asked.append(f"out: {element}")
        self.other.take_out(element)

    def put_in(self, element: str) -> None:
        self.asked.append(f"in: {element}")
        self.other.put_in(element)


@pytest.mark.parametrize(("recipe", "rig"), [(ALONE, NO_SLIDE), (NIGHT, NO_SLIDE), (ALONE, BENCH)])
def test_without_a_slide_a_person_is_asked_once_for_each_change(recipe: str, rig: str, tmp_path: Path) -> None:
    job = make_night(tmp_path / "run.h5", night(AGAIN, recipe=recipe), rig)
    hands = Hands(job.person)

    assert run_job(replace(job, person=hands)).exit_code == 0

    assert hands.asked == ["out: part", "in: part", "out: part"]
    run = load_run(tmp_path / "run.h5")
    assert_empty_is_brightest(run, "empty", "empty again")
    assert all(visit.is_confirmed for visit in run.visits("empty"))


def test_where_a_slide_is_nobody_is_asked(tmp_path: Path) -> None:
    job = make_night(tmp_path / "run.h5", night(AGAIN))
    hands = Hands(job.person)

    assert run_job(replace(job, person=hands)).exit_code == 0

    assert hands.asked == []


@pytest.mark.parametrize("steps", [AGAIN, GOES_ON.replace(", unattended: go on", "", 1)])
def test_with_nobody_there_a_step_that_needs_hands_is_refused_before_anything_is_sent(
    steps: str, tmp_path: Path
) -> None:
    wire = Wire()
    job = make_night(tmp_path / "run.h5", night(steps), NO_SLIDE, wire=wire)

    with pytest.raises(PlanError, match="step 'empty' needs somebody to take out part") as told:
        run_job(replace(job, person=NobodyThere()))

    assert told.value.exit_code == 2
    assert "unattended: go on" in told.value.do
    assert wire.opened == []
    assert list(tmp_path.iterdir()) == []


def test_with_nobody_there_a_step_that_may_go_on_is_measured_and_flagged_as_unconfirmed(tmp_path: Path) -> None:
    job = make_night(tmp_path / "run.h5", night(GOES_ON), NO_SLIDE)

    outcome = run_job(replace(job, person=NobodyThere()))

    run = load_run(tmp_path / "run.h5")
    assert (outcome.status, outcome.exit_code) == ("complete", 0)
    assert [len(run.visits(step)) for step in ("empty", "plate", "empty again")] == [3, 24, 2]
    assert {visit.is_confirmed for step in ("empty", "empty again") for visit in run.visits(step)} == {False}
    assert all(visit.is_confirmed for visit in run.visits("plate"))
    warnings = [event["text"] for event in run.of_kind("event") if event["level"] == "warning"]
    assert warnings == [
        "step 'empty': nobody confirmed part out of the beam",
        "step 'empty again': nobody confirmed part out of the beam",
    ]


def test_visits_that_nobody_confirmed_are_left_out_of_the_fit_which_says_so(tmp_path: Path) -> None:
    job = make_night(tmp_path / "run.h5", night(GOES_ON), NO_SLIDE)
    run_job(replace(job, person=NobodyThere()))

    run = load_run(tmp_path / "run.h5")
    data, fitted = run_data(run), fit_run(run)

    assert data.unconfirmed == 5
    assert int(data.visits.is_open.sum()) == 24
    assert "visits left out because nobody confirmed what stood in the beam: 5" in fitted.notes
    offset = fitted.estimate("part.dial offset")
    assert offset is not None
    error = (offset.value - run.header.truth["part.dial offset"] + 45.0) % 90.0 - 45.0
    assert abs(error) < 5.0 * offset.u


def test_a_slide_whose_command_is_refused_ends_the_run_safely(tmp_path: Path) -> None:
    wire = Wire(cut=lambda said: "(@4)" in said.text and said.at_s > 50.0)

    outcome = run_job(make_night(tmp_path / "run.h5", wire=wire))

    assert (outcome.status, outcome.exit_code) == ("failed", 3)
    assert all(step.is_confirmed for step in outcome.safe_steps)
    assert load_run(tmp_path / "run.h5").status == "failed"
    assert wire.opened.count(HEAD) == 1
