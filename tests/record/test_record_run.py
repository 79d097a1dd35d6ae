"""Records folded into visits, darks and a status."""

import math
from typing import Any

import pytest
from record_cases import HEADER, dark, records, visit

from rigctl.errors import RecordError
from rigctl.interfaces import Flag
from rigctl.record import Run, Visit


def run_of(*entries: dict[str, Any], is_live: bool = False) -> Run:
    """A run that recorded these."""
    run = Run(HEADER, is_live=is_live)
    for record in entries:
        run.keep(record, run.parse(record))
    return run


def end(status: str) -> dict[str, Any]:
    return {"kind": "end", "t": 99.0, "status": status, "code": 0, "why": ""}


def test_a_visit_keeps_everything_its_record_says() -> None:
    (found,) = run_of(visit(3, [2], attempt=2)).attempts

    assert found == Visit(
        step="plate",
        number=3,
        index=(2,),
        attempt=2,
        start=1,
        began_s=26.5,
        ended_s=27.5,
        asked={"part mount": 10.0},
        read={"part mount": 10.001},
        dwells=found.dwells,
        status="ok",
        why="",
    )
    assert len(found.dwells["signal"].levels_w) == 4
    assert found.dwells["signal"].range_w == 2e-3
    assert (found.dwells["signal"].began_s, found.dwells["signal"].ended_s) == (27.0, 27.4)


def test_a_visit_keeps_conditions_presence_and_whether_anybody_saw_to_it() -> None:
    conditions = {"diode": {"current_a": 0.034, "voltage_v": None}}
    record = visit(0, [0]) | {"conditions": conditions, "present": {"part": False}, "confirmed": False}

    (found,) = run_of(record).attempts

    assert found.conditions["diode"]["current_a"] == 0.034
    assert math.isnan(found.conditions["diode"]["voltage_v"])
    assert found.present == {"part": False}
    assert not found.is_confirmed


def test_a_record_that_does_not_tell_of_presence_or_kind_of_dark_is_read_as_it_was_meant() -> None:
    run = run_of(visit(0, [0]), dark("before", 1.0))

    assert run.attempts[0].is_confirmed
    assert run.attempts[0].present == {}
    assert run.darks[0].what == "dark"


def test_a_lost_reading_comes_back_as_nan_with_its_flag() -> None:
    record = visit(0, [0])
    record["detectors"]["signal"]["levels_w"][1] = None
    record["detectors"]["signal"]["flags"] = 1

    (found,) = run_of(record).attempts

    assert math.isnan(found.dwells["signal"].levels_w[1])
    assert found.dwells["signal"].flags is Flag.OVERLOAD


def test_the_last_good_attempt_counts_even_when_a_failed_one_follows() -> None:
    first, second, third = visit(0, [0]), visit(0, [0], attempt=2), visit(0, [0], attempt=3, status="failed")

    run = run_of(first, second, third)

    assert [found.attempt for found in run.visits("plate")] == [2]
    assert [found.attempt for found in run.placed("plate")] == [2]
    assert len(run.attempts) == 3


def test_visits_come_in_the_order_of_time_not_of_the_grid() -> None:
    run = run_of(visit(0, [3]), visit(1, [1]), visit(2, [2]))

    assert [found.index for found in run.visits("plate")] == [(3,), (1,), (2,)]


def test_a_place_without_a_good_attempt_shows_the_last_one_but_is_no_good_visit() -> None:
    run = run_of(visit(0, [0], status="saturated"), visit(0, [0], attempt=2, status="failed"))

    assert run.visits("plate") == []
    assert [found.status for found in run.placed("plate")] == ["failed"]


def test_steps_are_kept_apart() -> None:
    run = run_of(*records())

    assert {found.step for found in run.visits("plate")} == {"plate"}
    assert [found.index for found in run.visits("empty pair")] == [(0, 2)]


def test_darks_keep_when_how_and_their_readings() -> None:
    found = run_of(*records()).darks[1]

    assert (found.step, found.when, found.how, found.began_s) == ("plate", "after", "by hand", 40.0)
    assert len(found.dwells["reference monitor"].levels_w) == 3


@pytest.mark.parametrize("status", ["complete", "stopped", "failed"])
def test_the_status_is_that_of_the_end_record(status: str) -> None:
    assert run_of(end(status)).status == status


def test_without_an_end_a_live_run_is_running_and_a_dead_one_was_recovered() -> None:
    assert run_of(is_live=True).status == "running"
    assert run_of(is_live=False).status == "recovered"


def test_its_duration_reaches_to_the_last_thing_recorded() -> None:
    event = {"kind": "event", "t": 12.5, "text": "", "level": "info"}

    assert run_of().duration_s == 0.0
    assert run_of(event).duration_s == 12.5
    assert run_of(event, visit(0, [0])).duration_s == 21.25
    assert run_of(event, visit(0, [0]), dark("after", 30.0)).duration_s == 31.0
    assert run_of(event, {"kind": "reading", "t": 50.0, "role": "oven", "values": {}}).duration_s == 50.0
    assert run_of(event, end("complete")).duration_s == 99.0


def test_records_of_a_kind_come_oldest_first() -> None:
    run = run_of(*records())

    assert [record["role"] for record in run.of_kind("identity")] == ["signal", "shutter"]


@pytest.mark.parametrize(
    ("record", "message"),
    [
        ({"kind": "vist"}, "a record says 'vist'"),
        ({"kind": "event", "t": 1.0, "text": ""}, "lacks level"),
        (visit(0, [4]), "outside the grid"),
        (visit(0, [-1]), "outside the grid"),
        (visit(0, [0, 0]), "outside the grid"),
        (visit(0, [0], step="plait"), "no step 'plait'"),
        (visit(0, [0], status="fine"), "a record says 'fine'"),
        (
            visit(0, [0]) | {"detectors": {"signl": dark("before", 1.0)["detectors"]["signal"]}},
            "says 'signl'",
        ),
        (dark("amid", 1.0), "says 'amid'"),
        (dark("during", 1.0) | {"what": "dusk"}, "says 'dusk'"),
        ({"kind": "reading", "t": 1.0, "role": "oven"}, "lacks values"),
        (dark("before", 1.0) | {"how": "by foot"}, "says 'by foot'"),
        (dark("before", 1.0) | {"step": "plait"}, "no step 'plait'"),
        (end("finished"), "says 'finished'"),
    ],
)
def test_a_record_that_does_not_fit_is_refused_before_it_is_written(record: dict[str, Any], message: str) -> None:
    with pytest.raises(RecordError, match=message):
        run_of(record)
