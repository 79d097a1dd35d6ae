"""Putting a run's view in its place, and taking the journal away once the final one has been checked."""

from pathlib import Path

from rigctl.errors import RecordError
from rigctl.record.disk import remove_durably, replace_durably
from rigctl.record.journal import journal_path
from rigctl.record.run import Run


def publish(path: Path, run: Run, journal: bytes) -> None:
    """Build a view and put it in the place of the last one."""
    _publish(path, run, journal, tail=b"", is_final=False)


def publish_final(path: Path, run: Run, journal: bytes, *, tail: bytes = b"") -> None:
    """Build the final view, read it back from the disk, put it in place, and remove the journal.

    Raises `RecordError` when anything fails on the way; the journal is then still there.
    """
    _publish(path, run, journal, tail=tail, is_final=True)
    try:
        remove_durably(journal_path(path))
    except OSError as error:
        raise _refused(path, error) from error


def _publish(path: Path, run: Run, journal: bytes, *, tail: bytes, is_final: bool) -> None:
    from rigctl.record.verify import refuse_another_run, require_intact
    from rigctl.record.view import view_image

    refuse_another_run(path, run.header.uuid)
    new = path.with_name(path.name + ".tmp")
    try:
        new.write_bytes(view_image(run, journal, tail=tail, is_final=is_final))
        if is_final:
            require_intact(new)
        replace_durably(new, path)
    except OSError as error:
        raise _refused(path, error) from error
    finally:
        new.unlink(missing_ok=True)


def _refused(path: Path, error: OSError) -> RecordError:
    return RecordError(
        f"the run file could not be written: {error.strerror or error}",
        where=str(path),
        do=f"nothing is lost: {journal_path(path)} has every record; make room, then `polrig verify`",
    )
