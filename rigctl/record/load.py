"""Reading runs back: finished, interrupted, or under way in another process.

A journal beside the run file is the truth. Where its writer is dead it is folded into the file first; where
it is alive nothing is touched.
"""

import errno
import fcntl
import os
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

from rigctl.errors import DamagedFileError, RecordError, UsageError
from rigctl.record.collector import collector_at_rest
from rigctl.record.journal import JournalContent, journal_path, parse_journal
from rigctl.record.publish import publish_final
from rigctl.record.run import Run
from rigctl.record.verify import Verification, check_file, open_view

_NOT_OURS_TO_WRITE = (errno.EACCES, errno.EPERM, errno.EROFS)


def load_run(path: Path) -> Run:
    """Return everything a run recorded.

    A journal left behind by a crash is folded into the run file first. In a folder that cannot be written it
    is only read.

    Raises
    ------
    UsageError
        When there is no such file.
    DamagedFileError
        When the file cannot be read, or its copy of the journal is not whole.
    RecordError
        When a journal lies there that cannot be folded.
    """
    path = Path(path)
    run = _from_journal(path)
    if run is not None:
        return run
    if not path.exists():
        raise UsageError("there is no such run file", where=str(path))
    return _from_file(path)


def verify_run(path: Path) -> Verification:
    """Check a run file against the digests stored when it was closed, folding a dead run's journal first."""
    path = Path(path)
    run = _from_journal(path)
    if run is not None and run.is_live:
        return Verification(path, is_live=True, is_closed=False)
    if not path.exists():
        raise UsageError("there is no such run file", where=str(path))
    return check_file(path)


def _from_journal(path: Path) -> Run | None:
    journal = journal_path(path)
    while True:
        try:
            file = journal.open("rb")
        except FileNotFoundError:
            return None
        with file:
            is_live = not _lock(file.fileno())
            if not is_live and not _is_still_there(file.fileno(), journal):
                continue
            content = parse_journal(file.read())
            run = _run(content.records, journal, is_live=is_live)
            if not is_live:
                _fold(path, run, content, file.fileno())
            return run


def _lock(fd: int) -> bool:
    """Take a journal's lock unless its writer holds it."""
    try:
        fcntl.flock(fd, fcntl.LOCK_EX | fcntl.LOCK_NB)
    except BlockingIOError:
        return False
    return True


def _is_still_there(fd: int, journal: Path) -> bool:
    """Whether the journal that was opened has not been folded by another reader meanwhile."""
    try:
        return os.path.samestat(os.fstat(fd), journal.stat())
    except FileNotFoundError:
        return False


def _fold(path: Path, run: Run, content: JournalContent, fd: int) -> None:
    try:
        publish_final(path, run, os.pread(fd, content.size, 0), tail=content.tail)
    except RecordError as error:
        cause = error.__cause__
        if not isinstance(cause, OSError) or cause.errno not in _NOT_OURS_TO_WRITE:
            raise


def _from_file(path: Path) -> Run:
    from rigctl.record.view import JOURNAL

    with open_view(path) as file:
        try:
            content = parse_journal(bytes(file[JOURNAL][()]))
        except (KeyError, OSError, RuntimeError) as error:
            raise DamagedFileError("holds no record of a run that can be read", where=str(path)) from error
    if content.tail:
        raise DamagedFileError(
            f"only {len(content.records)} records can be read; the rest is damaged",
            where=str(path),
            do="`polrig verify` names what has changed",
        )
    return _run(content.records, path, is_live=False)


def _run(records: Sequence[Mapping[str, Any]], path: Path, *, is_live: bool) -> Run:
    if not records or records[0]["kind"] != "header":
        raise RecordError(
            "no run stands in it: one is just being started, or was killed before it began",
            where=str(path),
            do="try again; where it stays so, nothing was measured and it can be deleted",
        )
    with collector_at_rest():
        return Run.of(records, is_live=is_live)
