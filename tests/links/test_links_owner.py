"""Lock files: who may open them, what a stale one does, and what an unusable one says."""

import os
import tempfile
from pathlib import Path

import pytest

from rigctl.errors import BusyError
from rigctl.links.owner import Ownership

PLACE = "tcp://10.0.0.7:5025"


def lock_file(directory: Path) -> Path:
    (found,) = directory.glob("polrig-*.lock")
    return found


def test_the_lock_names_its_owner_and_anybody_may_take_it_over(own_lock_files: Path) -> None:
    Ownership("tcp://meter:5025", place=PLACE).close()

    lock = lock_file(own_lock_files)
    assert lock.read_text() == f"{os.getpid()}\n"
    assert lock.stat().st_mode & 0o777 == 0o666


def test_a_lock_file_whose_owner_is_dead_is_taken_over(own_lock_files: Path) -> None:
    Ownership("tcp://meter:5025", place=PLACE).close()
    lock_file(own_lock_files).write_text("999999999999\n")

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

    first.close()
    assert f"process {os.getpid()}" in str(caught.value)
    assert str(lock_file(own_lock_files)) in str(caught.value)


def test_a_hold_can_be_let_go_twice_and_taken_again() -> None:
    first = Ownership("a", place=PLACE)
    first.close()
    first.close()

    Ownership("a", place=PLACE).close()


def test_a_symbolic_link_is_not_followed(own_lock_files: Path) -> None:
    Ownership("a", place=PLACE).close()
    lock = lock_file(own_lock_files)
    lock.unlink()
    target = own_lock_files / "precious"
    target.write_text("keep me")
    lock.symlink_to(target)

    with pytest.raises(BusyError, match="lock cannot be opened"):
        Ownership("a", place=PLACE)

    assert target.read_text() == "keep me"


def test_a_directory_that_cannot_be_used_is_told(
    monkeypatch: pytest.MonkeyPatch, own_lock_files: Path
) -> None:
    monkeypatch.setattr(tempfile, "tempdir", str(own_lock_files / "missing"))

    with pytest.raises(BusyError, match="see who may write"):
        Ownership("a", place=PLACE)
