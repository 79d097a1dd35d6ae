"""A program killed at any moment: the file opens, and nothing acknowledged is missing."""

import multiprocessing
import os
import random
import time
from multiprocessing.connection import Connection
from pathlib import Path

import h5py
import pytest
from record_cases import small_header, small_visit

from rigctl.record import create_run, load_run, verify_run
from rigctl.record.journal import parse_journal

KILLS = 30
VISITS = 3000
CONTEXT = multiprocessing.get_context("forkserver")
CONTEXT.set_forkserver_preload(["record_cases", "rigctl.record.view", "rigctl.record.verify"])


def record_for_ever(path: Path, told: Connection) -> None:
    """Record durably, tell what was acknowledged, and build a view every few records."""
    writer = create_run(path, small_header(VISITS), durable=True)
    told.send_bytes(b"r")
    for number in range(VISITS):
        writer.append(small_visit(number))
        told.send_bytes(b"a")
        if number % 7 == 0:
            told.send_bytes(b"v")
            writer.view()
            told.send_bytes(b"V")


def killed_after(path: Path, delay_s: float) -> bytes:
    """Start a recording process, kill it, and return all that it told."""
    here, there = CONTEXT.Pipe(duplex=False)
    process = CONTEXT.Process(target=record_for_ever, args=(path, there))
    process.start()
    there.close()
    told = here.recv_bytes()
    time.sleep(delay_s)
    process.kill()
    process.join()
    while True:
        try:
            told += here.recv_bytes()
        except (EOFError, OSError):
            here.close()
            return told


def kill_and_check(tmp_path: Path, kills: int, seed: int) -> int:
    """Kill a recording process many times; how often a view was under way."""
    chance, in_view = random.Random(seed), 0
    for kill in range(kills):
        path = tmp_path / f"{kill}.h5"
        told = killed_after(path, chance.uniform(0.0, 0.08))
        acknowledged = told.count(b"a")
        in_view += told.count(b"v") > told.count(b"V")

        with h5py.File(path, "r") as view:
            assert view["/entry/data/status"].shape == (VISITS,)
        run = load_run(path)

        numbers = [visit.number for visit in run.attempts]
        # one more may have reached the disk before its acknowledgement was told
        assert numbers in (list(range(acknowledged)), list(range(acknowledged + 1)))
        assert [visit.dwells["signal"].levels_w for visit in run.attempts] == [
            tuple(small_visit(number)["detectors"]["signal"]["levels_w"]) for number in numbers
        ]
        assert run.status == "recovered"
        assert verify_run(path).is_whole
        assert sorted(entry.name for entry in tmp_path.glob(f"{kill}.h5*")) == [f"{kill}.h5"]
    return in_view


def test_no_kill_loses_an_acknowledged_record_or_leaves_a_file_that_does_not_open(tmp_path: Path) -> None:
    in_view = kill_and_check(tmp_path, KILLS, seed=1)

    assert in_view >= 3


@pytest.mark.soak
def test_a_thousand_kills_lose_nothing(tmp_path: Path) -> None:
    in_view = kill_and_check(tmp_path, 1000, seed=2)

    assert in_view >= 100


def test_a_journal_cut_anywhere_folds_to_a_whole_file_with_its_records(tmp_path: Path) -> None:
    with create_run(tmp_path / "0.h5", small_header(3), durable=True) as writer:
        header = writer._journal.size
        for number in range(3):
            writer.append(small_visit(number))
    data = (tmp_path / "0.h5.journal").read_bytes()

    for cut in range(header, len(data) + 1, 37):
        path = tmp_path / f"cut {cut}.h5"
        path.with_name(path.name + ".journal").write_bytes(data[:cut])
        whole = len(parse_journal(data[:cut]).records) - 1

        assert len(load_run(path).attempts) == whole
        with h5py.File(path, "r") as file:
            tail = (
                bytes(file["/entry/acquisition/journal_tail/data"][()])
                if "journal_tail" in file["/entry/acquisition"]
                else b""
            )
            kept = bytes(file["/entry/acquisition/journal/data"][()])
        assert kept + tail == data[:cut]
        assert os.listdir(tmp_path).count(f"cut {cut}.h5") == 1
