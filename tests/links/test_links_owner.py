"""Lock files: who may open them, what a stale one does, and what an unusable one says."""

import contextlib
import fcntl
import os
import tempfile
import threading
from pathlib import Path

import pytest

from rigctl.errors import BusyError
from rigctl.links.owner import Ownership

PLACE = "tcp://10.0.0.7:5025"


def lock_file(directory: Path) -> Path:
    (found,) = directory.glob("polrig-*.lock")
    return found


def left_behind(directory: Path) -> Path:
    """Where the lock file of a dead owner would lie."""
    held = Ownership("a", place=PLACE)
    path = lock_file(directory)
    held.close()
    return path


def test_the_lock_names_its_owner_and_anybody_may_take_it_over(own_lock_files: Path) -> None:
    held = Ownership("tcp://meter:5025", place=PLACE)

    lock = lock_file(own_lock_files)
    assert lock.read_text() == f"{os.getpid()}\n"
    assert lock.stat().st_mode & 0o777 == 0o666
    held.close()


def test_an_owner_takes_its_lock_file_away(own_lock_files: Path) -> None:
    Ownership("a", place=PLACE).close()

    assert list(own_lock_files.glob("polrig-*")) == []


def test_a_lock_file_whose_owner_is_dead_is_taken_over(own_lock_files: Path) -> None:
    left_behind(own_lock_files).write_text("999999999999\n")

    held = Ownership("tcp://meter:5025", place=PLACE)

    assert lock_file(own_lock_files).read_text() == f"{os.getpid()}\n"
    held.close()


def test_other_places_do_not_hinder_each_other() -> None:
    first = Ownership("a", place="tcp://10.0.0.7:5025")
    second = Ownership("b", place="tcp://10.0.0.7:5026")

    second.close()
    first.close()


def test_a_second_hold_says_who_has_it_and_where_the_lock_is(own_lock_files: Path) -> None:
    first = Ownership("tcp://meter:5025", place=PLACE)

    with pytest.raises(BusyError) as caught:
        Ownership("tcp://meter:5025", place=PLACE)

    assert f"process {os.getpid()}" in str(caught.value)
    assert str(lock_file(own_lock_files)) in str(caught.value)
    first.close()


def test_a_hold_can_be_let_go_twice_and_taken_again() -> None:
    first = Ownership("a", place=PLACE)
    first.close()
    first.close()

    Ownership("a", place=PLACE).close()


def test_a_symbolic_link_is_not_followed(own_lock_files: Path) -> None:
    lock = left_behind(own_lock_files)
    target = own_lock_files / "precious"
    target.write_text("keep me")
    lock.symlink_to(target)

    with pytest.raises(BusyError, match="lock cannot be opened"):
        Ownership("a", place=PLACE)

    assert target.read_text() == "keep me"


def test_a_lock_on_a_file_that_was_just_taken_away_does_not_count(
    own_lock_files: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    first = Ownership("a", place=PLACE)
    flock, times = fcntl.flock, iter([True])

    def lock_after_the_owner_left(fd: int, operation: int) -> None:
        if next(times, False):
            first.close()
        flock(fd, operation)

    monkeypatch.setattr(fcntl, "flock", lock_after_the_owner_left)
    second = Ownership("a", place=PLACE)

    with pytest.raises(BusyError):
        Ownership("a", place=PLACE)
    assert lock_file(own_lock_files).read_text() == f"{os.getpid()}\n"
    second.close()


def test_of_many_that_want_one_address_at_once_one_at_a_time_has_it() -> None:
    inside, most = [0], [0]

    def take_and_leave() -> None:
        for _ in range(200):
            with contextlib.suppress(BusyError):
                held = Ownership("a", place=PLACE)
                inside[0] += 1
                most[0] = max(most[0], inside[0])
                inside[0] -= 1
                held.close()

    threads = [threading.Thread(target=take_and_leave) for _ in range(4)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()

    assert most == [1]


def test_a_directory_that_cannot_be_used_is_told(monkeypatch: pytest.MonkeyPatch, own_lock_files: Path) -> None:
    monkeypatch.setattr(tempfile, "tempdir", str(own_lock_files / "missing"))

    with pytest.raises(BusyError, match="see who may write"):
        Ownership("a", place=PLACE)
