"""A disk that is full or fails: what was acknowledged stays, and nothing is claimed that is not there."""

import errno
import os
import resource
import subprocess
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import pytest
from record_cases import killed, small_header, small_visit

from rigctl.errors import RecordError
from rigctl.record import RunWriter, create_run, load_run, verify_run
from rigctl.record import publish as publish_module
from rigctl.record.journal import parse_journal

VISITS = 400


@contextmanager
def longest_file(size: int) -> Iterator[None]:
    """Let the system refuse to make any file longer than this: first a short write, then an error."""
    soft, hard = resource.getrlimit(resource.RLIMIT_FSIZE)
    resource.setrlimit(resource.RLIMIT_FSIZE, (size, hard))
    try:
        yield
    finally:
        resource.setrlimit(resource.RLIMIT_FSIZE, (soft, hard))


def append_until_refused(writer: RunWriter) -> tuple[int, RecordError]:
    """Record visits until one is refused; how many were acknowledged, and the refusal."""
    for number in range(VISITS):
        try:
            writer.append(small_visit(number))
        except RecordError as error:
            return number, error
    raise AssertionError("the disk never filled up")


@pytest.mark.parametrize("size", [6_000, 6_001, 6_100, 6_333, 20_000])
def test_a_record_cut_short_by_the_disk_is_an_error_and_all_before_are_kept(tmp_path: Path, size: int) -> None:
    writer = create_run(tmp_path / "night.h5", small_header(VISITS), durable=True)
    with longest_file(size):
        acknowledged, error = append_until_refused(writer)
    journal = (tmp_path / "night.h5.journal").read_bytes()

    writer.__exit__(None, None, None)
    run = load_run(tmp_path / "night.h5")

    assert "the disk refused a record" in error.what
    assert error.exit_code == 5
    assert len(journal) == size
    assert len(parse_journal(journal).records) == 1 + acknowledged
    assert [visit.number for visit in run.attempts] == list(range(acknowledged))


@pytest.fixture
def small_disk(tmp_path: Path) -> Iterator[Path]:
    """A disk of 256 KiB of its own."""
    disk = tmp_path / "disk"
    disk.mkdir()
    mounted = subprocess.run(
        ["mount", "-t", "tmpfs", "-o", "size=256k", "tmpfs", disk], capture_output=True, check=False
    )
    if mounted.returncode:
        pytest.skip("only root may mount a disk")
    yield disk
    subprocess.run(["umount", disk], check=True)


def test_a_full_disk_ends_the_run_with_every_acknowledged_record_readable(small_disk: Path) -> None:
    writer = create_run(small_disk / "night.h5", small_header(VISITS), durable=True)
    ballast = small_disk / "ballast"
    ballast.write_bytes(bytes(120_000))

    acknowledged, error = append_until_refused(writer)
    with pytest.raises(RecordError, match="refused a record"):
        writer.close("failed", t_s=1.0)

    assert "No space left on device" in error.what
    assert acknowledged > 10
    with pytest.raises(RecordError, match="could not be written"):
        load_run(small_disk / "night.h5")
    ballast.unlink()
    assert len(load_run(small_disk / "night.h5").attempts) == acknowledged
    assert verify_run(small_disk / "night.h5").is_whole


def test_a_final_view_without_room_keeps_the_journal_and_can_be_made_later(small_disk: Path) -> None:
    writer = create_run(small_disk / "night.h5", small_header(VISITS), durable=True)
    for number in range(50):
        writer.append(small_visit(number))
    ballast = small_disk / "ballast"
    ballast.write_bytes(bytes(os.statvfs(small_disk).f_bavail * os.statvfs(small_disk).f_bsize - 8192))

    with pytest.raises(RecordError, match="No space left on device") as caught:
        writer.close("complete", t_s=100.0)

    assert "nothing is lost" in caught.value.do
    assert sorted(entry.name for entry in small_disk.iterdir()) == ["ballast", "night.h5", "night.h5.journal"]
    ballast.unlink()
    assert load_run(small_disk / "night.h5").status == "complete"


def test_a_failed_sync_is_fatal_and_never_tried_again(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    calls: list[int] = []

    def fail(fd: int) -> None:
        calls.append(fd)
        raise OSError(errno.EIO, os.strerror(errno.EIO))

    writer = create_run(tmp_path / "night.h5", small_header(VISITS), durable=True)
    writer.append(small_visit(0))
    monkeypatch.setattr(os, "fdatasync", fail)

    for number in (1, 2):
        with pytest.raises(RecordError, match="Input/output error"):
            writer.append(small_visit(number))
    with pytest.raises(RecordError, match="Input/output error"):
        writer.close("failed", t_s=1.0)

    assert len(calls) == 1


def test_a_file_that_the_disk_gives_back_changed_keeps_the_journal(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    write_bytes = Path.write_bytes

    def corrupt(path: Path, data: bytes) -> int:
        place = data.index(b"QWP-118")
        return write_bytes(path, data[:place] + b"QWP-119" + data[place + 7 :])

    writer = create_run(tmp_path / "night.h5", small_header(VISITS), durable=True)
    monkeypatch.setattr(Path, "write_bytes", corrupt)

    with pytest.raises(RecordError, match="the disk gave back other data: /entry/sample/name has changed"):
        writer.close("complete", t_s=1.0)

    monkeypatch.undo()
    assert sorted(entry.name for entry in tmp_path.iterdir()) == ["night.h5", "night.h5.journal"]
    assert load_run(tmp_path / "night.h5").status == "complete"


@pytest.mark.parametrize("number", [errno.EACCES, errno.EROFS, errno.EPERM])
def test_in_a_folder_that_cannot_be_written_a_dead_run_is_read_without_folding(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, number: int
) -> None:
    killed(tmp_path / "night.h5")

    def refuse(path: Path, data: bytes) -> int:
        raise OSError(number, os.strerror(number))

    monkeypatch.setattr(Path, "write_bytes", refuse)
    run = load_run(tmp_path / "night.h5")

    assert (run.status, len(run.attempts)) == ("recovered", 6)
    assert (tmp_path / "night.h5.journal").exists()


def test_a_journal_that_cannot_be_taken_away_is_told_and_harmless(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def refuse(path: Path) -> None:
        raise OSError(errno.EBUSY, os.strerror(errno.EBUSY))

    writer = create_run(tmp_path / "night.h5", small_header(VISITS), durable=True)
    monkeypatch.setattr(publish_module, "remove_durably", refuse)

    with pytest.raises(RecordError, match="busy"):
        writer.close("complete", t_s=1.0)

    monkeypatch.undo()
    assert load_run(tmp_path / "night.h5").status == "complete"
    assert [entry.name for entry in tmp_path.iterdir()] == ["night.h5"]


def test_a_file_is_forced_to_the_disk_before_it_takes_its_name_and_the_name_after(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    calls: list[str] = []
    fsync, replace = os.fsync, os.replace

    def note_sync(fd: int) -> None:
        calls.append(f"sync {Path(os.readlink(f'/proc/self/fd/{fd}')).name}")
        fsync(fd)

    def note_replace(old: Path, new: Path) -> None:
        calls.append(f"{old.name} becomes {new.name}")
        replace(old, new)

    writer = create_run(tmp_path / "night.h5", small_header(VISITS), durable=True)
    monkeypatch.setattr(os, "fsync", note_sync)
    monkeypatch.setattr(os, "replace", note_replace)
    writer.close("complete", t_s=1.0)

    folder = f"sync {tmp_path.name}"
    assert calls == ["sync night.h5.tmp", "night.h5.tmp becomes night.h5", folder, folder]


def test_a_durable_record_is_forced_to_the_disk_before_it_is_acknowledged_and_a_rehearsed_one_is_not(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    synced: list[int] = []
    monkeypatch.setattr(os, "fdatasync", synced.append)

    for durable in (True, False):
        with create_run(tmp_path / f"{durable}.h5", small_header(VISITS), durable=durable) as writer:
            for number in range(3):
                writer.append(small_visit(number))

    assert len(synced) == 1 + 3
