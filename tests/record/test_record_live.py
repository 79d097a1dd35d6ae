"""A run that is being recorded, read by others."""

import fcntl
import multiprocessing
import os
import subprocess
import sys
import threading
from multiprocessing.connection import Connection
from pathlib import Path

import pytest
from record_cases import HEADER, finished, killed, records, small_header, small_visit, write

from rigctl.errors import RecordError
from rigctl.record import create_run, load_run, verify_run
from rigctl.record.journal import Journal, journal_path

VISITS = 400
CONTEXT = multiprocessing.get_context("forkserver")
CONTEXT.set_forkserver_preload(["record_cases", "rigctl.record.view", "rigctl.record.verify"])
READ_ONCE = """
import sys
from rigctl.record import load_run
run = load_run(sys.argv[1])
print(run.status, run.is_live, len(run.attempts))
"""


def read_many_times(path: Path, told: Connection, stop: Connection) -> None:
    """Read a run again and again, until told to stop; tell how many visits each reading found."""
    while not stop.poll():
        told.send(len(load_run(path).attempts))
    told.send(None)


def test_another_process_sees_every_record_at_once_and_touches_nothing(tmp_path: Path) -> None:
    path = tmp_path / "night.h5"
    with write(path, durable=True):
        before = {entry.name: (entry.stat().st_mtime_ns, entry.read_bytes()) for entry in tmp_path.iterdir()}

        done = subprocess.run([sys.executable, "-c", READ_ONCE, path], capture_output=True, text=True, check=True)

        assert done.stdout.split() == ["running", "True", "6"]
        after = {entry.name: (entry.stat().st_mtime_ns, entry.read_bytes()) for entry in tmp_path.iterdir()}
        assert after == before


def test_a_run_is_not_disturbed_by_a_reader_that_never_stops(tmp_path: Path) -> None:
    path = tmp_path / "night.h5"
    told, tell = CONTEXT.Pipe(duplex=False)
    stop, stopping = CONTEXT.Pipe(duplex=False)
    with create_run(path, small_header(VISITS), durable=True) as writer:
        reader = CONTEXT.Process(target=read_many_times, args=(path, tell, stop))
        reader.start()
        counts = [told.recv()]
        for number in range(VISITS):
            writer.append(small_visit(number))
            if number % 40 == 0:
                writer.view()
            while told.poll():
                counts.append(told.recv())
        writer.close("complete", t_s=900.0)
    stopping.send(None)
    counts += iter(told.recv, None)
    reader.join()

    assert reader.exitcode == 0
    assert counts == sorted(counts)
    assert len(counts) > 5
    assert len(load_run(path).attempts) == VISITS
    assert verify_run(path).is_whole


def test_a_half_written_last_line_is_not_seen(tmp_path: Path) -> None:
    with write(tmp_path / "night.h5"):
        with journal_path(tmp_path / "night.h5").open("ab") as journal:
            journal.write(b"12345678 40 {")

        assert len(load_run(tmp_path / "night.h5").records) == 1 + len(records())


def test_a_rehearsal_under_way_can_be_read_before_it_has_a_file(tmp_path: Path) -> None:
    with write(tmp_path / "night.h5"):
        assert load_run(tmp_path / "night.h5").is_live


def test_a_run_that_is_just_being_started_is_told_as_such(tmp_path: Path) -> None:
    journal = Journal(tmp_path / "night.h5.journal", durable=False)

    with pytest.raises(RecordError, match="no run stands in it") as caught:
        load_run(tmp_path / "night.h5")

    journal.close()
    assert "try again" in caught.value.do
    assert journal.path.exists()


def test_a_program_killed_before_it_wrote_the_header_leaves_something_that_says_so(tmp_path: Path) -> None:
    journal_path(tmp_path / "night.h5").write_bytes(b"0123")

    with pytest.raises(RecordError, match="killed before it began") as caught:
        load_run(tmp_path / "night.h5")

    assert "it can be deleted" in caught.value.do


def test_a_starting_run_waits_for_a_reader_that_looks_at_its_lock(tmp_path: Path) -> None:
    path = tmp_path / "night.h5.journal"
    made: list[Journal] = []
    starting = threading.Thread(target=lambda: made.append(Journal(path, durable=False)))

    # the reader wins the race for the lock of a file just made
    real_open, reader = os.open, -1

    def open_and_lock(name: Path, flags: int, mode: int = 0o777) -> int:
        nonlocal reader
        fd = real_open(name, flags, mode)
        reader = real_open(name, os.O_RDONLY)
        fcntl.flock(reader, fcntl.LOCK_EX)
        return fd

    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(os, "open", open_and_lock)
        starting.start()
        starting.join(0.05)
    assert made == []

    os.close(reader)
    starting.join()
    made[0].close()
    assert path.exists()


def test_a_run_folded_by_somebody_else_in_the_meantime_is_read_from_its_file(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    path = tmp_path / "night.h5"
    killed(path)
    lock, calls = fcntl.flock, []

    def lose_the_race(fd: int, how: int) -> None:
        calls.append(fd)
        if len(calls) == 1:
            load_run(path)
        lock(fd, how)

    monkeypatch.setattr(fcntl, "flock", lose_the_race)
    run = load_run(path)

    assert (run.status, run.header) == ("recovered", HEADER)
    assert [entry.name for entry in tmp_path.iterdir()] == ["night.h5"]


def test_after_the_writer_has_gone_its_lock_is_free(tmp_path: Path) -> None:
    with write(tmp_path / "night.h5", durable=True):
        assert load_run(tmp_path / "night.h5").is_live

    assert not load_run(tmp_path / "night.h5").is_live


def test_a_file_that_another_program_holds_open_for_changes_can_be_read(tmp_path: Path) -> None:
    finished(tmp_path / "night.h5")

    with (tmp_path / "night.h5").open("r+b") as other:
        fcntl.flock(other, fcntl.LOCK_EX)

        assert load_run(tmp_path / "night.h5").status == "complete"
        assert verify_run(tmp_path / "night.h5").is_whole
