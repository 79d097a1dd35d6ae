"""Recording a run: what is never overwritten, when views appear, how it ends."""

from collections.abc import Callable
from dataclasses import replace
from datetime import UTC, datetime
from pathlib import Path

import h5py
import pytest
from record_cases import HEADER, STATES, records, small_header, small_visit, visit, write

from rigctl.errors import RecordError
from rigctl.record import Run, create_run, load_run, verify_run
from rigctl.record import run_writer as run_writer_module
from rigctl.record.publish import publish
from rigctl.timeline import StopRequest, VirtualTimeline


@pytest.mark.parametrize("state", STATES)
def test_a_run_file_in_any_state_is_never_overwritten(state: str, tmp_path: Path) -> None:
    path = tmp_path / "night.h5"
    STATES[state](path)
    before = {entry.name: entry.read_bytes() for entry in tmp_path.iterdir()}

    with pytest.raises(RecordError) as caught:
        create_run(path, HEADER, durable=True)

    assert "choose another name" in caught.value.do
    assert {entry.name: entry.read_bytes() for entry in tmp_path.iterdir()} == before


def test_a_journal_alone_is_never_overwritten_either(tmp_path: Path) -> None:
    path = tmp_path / "night.h5"
    with write(path):
        pass

    with pytest.raises(RecordError, match="a journal lies there") as caught:
        create_run(path, HEADER, durable=False)

    assert "folds an interrupted run" in caught.value.do
    assert load_run(path).status == "recovered"


def test_a_file_that_appears_while_a_rehearsal_runs_is_not_overwritten(tmp_path: Path) -> None:
    path = tmp_path / "night.h5"
    with write(path) as writer:
        path.write_text("somebody else's")

        with pytest.raises(RecordError, match="never overwritten"):
            writer.close("complete", t_s=50.0)

    assert path.read_text() == "somebody else's"
    path.rename(tmp_path / "elsewhere")
    assert load_run(path).status == "complete"


def test_another_runs_file_beside_a_dead_journal_is_left_alone(tmp_path: Path) -> None:
    STATES["killed"](tmp_path / "a.h5")
    with create_run(tmp_path / "b.h5", replace(HEADER, uuid="another"), durable=False) as writer:
        writer.close("complete", t_s=1.0)
    (tmp_path / "b.h5").replace(tmp_path / "a.h5")

    with pytest.raises(RecordError, match="another run's file") as caught:
        load_run(tmp_path / "a.h5")

    assert caught.value.do == "move it away and try again"


def test_a_run_that_cannot_begin_leaves_no_trace(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def refuse(*_: object) -> None:
        raise RecordError("no")

    monkeypatch.setattr(run_writer_module, "publish", refuse)

    with pytest.raises(RecordError, match="no"):
        create_run(tmp_path / "night.h5", HEADER, durable=True)

    assert list(tmp_path.iterdir()) == []


def test_a_wrong_header_leaves_no_trace(tmp_path: Path) -> None:
    with pytest.raises(RecordError, match="one detector"):
        create_run(tmp_path / "night.h5", replace(HEADER, detectors=()), durable=True)

    assert list(tmp_path.iterdir()) == []


def test_a_durable_run_has_its_file_before_the_first_record(tmp_path: Path) -> None:
    with (
        create_run(tmp_path / "night.h5", HEADER, durable=True),
        h5py.File(tmp_path / "night.h5", "r") as file,
    ):
        assert file["/entry/plate/status"][...].tolist() == [0, 0, 0, 0]


def test_a_rehearsal_builds_its_one_view_at_the_end(tmp_path: Path) -> None:
    path = tmp_path / "night.h5"
    with write(path) as writer:
        timeline = VirtualTimeline(HEADER.start)
        timeline.wait_until(1e6)
        writer.view_if_due(timeline)
        assert not path.exists()

        writer.close("complete", t_s=42.0)

    assert path.exists()


def test_a_finished_run_leaves_one_file(tmp_path: Path) -> None:
    with write(tmp_path / "night.h5", durable=True) as writer:
        writer.close("complete", t_s=42.0)

    assert [entry.name for entry in tmp_path.iterdir()] == ["night.h5"]


def test_left_without_closing_it_keeps_the_journal_for_the_next_reader(tmp_path: Path) -> None:
    with pytest.raises(KeyError), write(tmp_path / "night.h5", durable=True):
        raise KeyError

    assert (tmp_path / "night.h5.journal").exists()
    assert len(load_run(tmp_path / "night.h5").attempts) == 6


def test_a_record_that_does_not_fit_is_refused_and_the_run_goes_on(tmp_path: Path) -> None:
    with write(tmp_path / "night.h5") as writer:
        with pytest.raises(RecordError, match="outside the grid"):
            writer.append(visit(9, [99]))
        writer.append(visit(9, [3]))
        writer.close("complete", t_s=60.0)

    assert load_run(tmp_path / "night.h5").attempts[-1].index == (3,)


def test_what_was_recorded_so_far_is_at_hand_while_it_runs(tmp_path: Path) -> None:
    with write(tmp_path / "night.h5") as writer:
        assert [found.index for found in writer.run.visits("plate")] == [(0,), (1,)]
        assert writer.run.status == "running"


def test_a_run_that_was_closed_accepts_nothing_more(tmp_path: Path) -> None:
    writer = write(tmp_path / "night.h5")
    writer.close("complete", t_s=42.0)

    with pytest.raises(RecordError, match="closed"):
        writer.append(visit(9, [3]))

    assert verify_run(tmp_path / "night.h5").is_whole


@pytest.mark.parametrize("durable", [True, False])
def test_the_same_header_and_records_make_the_same_bytes_under_any_name(tmp_path: Path, durable: bool) -> None:
    for name in ("a.h5", "b.h5"):
        with write(tmp_path / name, durable=durable) as writer:
            writer.close("complete", t_s=42.0)

    assert (tmp_path / "a.h5").read_bytes() == (tmp_path / "b.h5").read_bytes()


def test_another_record_makes_other_bytes(tmp_path: Path) -> None:
    for name, t_s in (("a.h5", 42.0), ("b.h5", 43.0)):
        with write(tmp_path / name) as writer:
            writer.close("complete", t_s=t_s)

    assert (tmp_path / "a.h5").read_bytes() != (tmp_path / "b.h5").read_bytes()


class SlowDisk:
    """A timeline on which each view takes a while, and a count of the views."""

    is_virtual = False

    def __init__(self, view_takes_s: float) -> None:
        self.start, self.stop = datetime(2026, 12, 1, tzinfo=UTC), StopRequest()
        self.view_takes_s, self.t_s, self.views = view_takes_s, 0.0, 0

    def now(self) -> float:
        return self.t_s

    def wait_until(self, instant_s: float) -> None:
        self.t_s = instant_s

    def pulse(self) -> None:
        pass

    def view(self, *_: object) -> None:
        self.views += 1
        self.t_s += self.view_takes_s


@pytest.mark.parametrize(("view_takes_s", "views"), [(0.01, 10), (0.1, 10), (1.0, 2)])
def test_views_are_as_frequent_as_their_cost_allows(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, view_takes_s: float, views: int
) -> None:
    disk = SlowDisk(view_takes_s)
    with create_run(tmp_path / "night.h5", HEADER, durable=True) as writer:
        monkeypatch.setattr(run_writer_module, "publish", disk.view)
        while disk.t_s < 99.0:
            disk.t_s += 0.5
            writer.view_if_due(disk)

    assert disk.views == views


def fail_once(monkeypatch: pytest.MonkeyPatch) -> Callable[[], int]:
    """Make the next view fail, and those after it succeed."""
    calls: list[int] = []

    def flaky(path: Path, run: Run, journal: bytes) -> None:
        calls.append(1)
        if len(calls) == 1:
            raise RecordError("the run file could not be written: No space left on device")
        publish(path, run, journal)

    monkeypatch.setattr(run_writer_module, "publish", flaky)
    return lambda: len(calls)


def test_a_view_that_fails_does_not_end_the_run_and_is_tried_again(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    timeline = VirtualTimeline(HEADER.start)
    with create_run(tmp_path / "night.h5", small_header(4), durable=True) as writer:
        views = fail_once(monkeypatch)
        for number in range(4):
            writer.append(small_visit(number))
            writer.view_if_due(timeline)
            timeline.wait_until(timeline.now() + 11.0)

    run = load_run(tmp_path / "night.h5")
    assert views() == 4
    assert [event["level"] for event in run.of_kind("event")] == ["warning"]
    assert "No space left" in run.of_kind("event")[0]["text"]
    assert len(run.visits("data")) == 4


def test_the_end_is_the_last_record(tmp_path: Path) -> None:
    with write(tmp_path / "night.h5") as writer:
        writer.close("failed", t_s=44.5, code=3, why="head 7: nobody there")

    run = load_run(tmp_path / "night.h5")
    assert run.end == {"kind": "end", "t": 44.5, "status": "failed", "code": 3, "why": "head 7: nobody there"}
    assert run.records[-1] == run.end
    assert run.records[1:-1] == records()
