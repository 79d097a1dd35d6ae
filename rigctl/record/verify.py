"""Is a run file whole, and are its data what they were when it was closed?"""

import io
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from rigctl.errors import DamagedFileError, RecordError


@dataclass(frozen=True, slots=True)
class Verification:
    """What a check found; paths are those of groups and datasets inside the file.

    `checked` counts objects. `added` is what came after closing (fits, notes), which is no damage.
    """

    path: Path
    is_live: bool
    is_closed: bool
    checked: int = 0
    changed: tuple[str, ...] = ()
    missing: tuple[str, ...] = ()
    added: tuple[str, ...] = ()

    @property
    def is_whole(self) -> bool:
        """Whether the run was closed and nothing measured has changed since."""
        return self.is_closed and not self.changed and not self.missing

    def findings(self) -> tuple[str, ...]:
        """What is wrong, a sentence each."""
        state = "it is being recorded now" if self.is_live else "it was never closed: a copy made during its run"
        return (
            *(() if self.is_closed else (state,)),
            *(f"{path} has changed" for path in self.changed),
            *(f"{path} is missing" for path in self.missing),
        )


def check_file(path: Path) -> Verification:
    """Compare a run file with the digests stored in it; `DamagedFileError` when it cannot be read at all."""
    from rigctl.record.digest import DIGEST, digests, stored_digests

    with open_view(path) as file:
        try:
            stored = stored_digests(file)
        except (ValueError, KeyError, OSError, RuntimeError):
            return Verification(path, is_live=False, is_closed=True, changed=(DIGEST,))
        if stored is None:
            return Verification(path, is_live=False, is_closed=False)
        found = digests(file)
    return Verification(
        path,
        is_live=False,
        is_closed=True,
        checked=len(stored),
        changed=tuple(name for name in stored if name in found and found[name] != stored[name]),
        missing=tuple(name for name in stored if name not in found),
        added=tuple(name for name in found if name not in stored),
    )


def require_intact(path: Path) -> None:
    """Raise `RecordError` unless a file just written reads back as it was meant."""
    result = check_file(path)
    if not result.is_whole:
        raise RecordError(f"the disk gave back other data: {'; '.join(result.findings())}", where=str(path))


def refuse_another_run(path: Path, uuid: str) -> None:
    """Raise `RecordError` when the file at a path is not a view of the run with this UUID."""
    if path.exists() and _uuid(path) != uuid:
        raise RecordError(
            "another run's file lies there, and it is never overwritten",
            where=str(path),
            do="move it away and try again",
        )


def open_view(path: Path) -> Any:
    """Open a copy of a run file in memory; `DamagedFileError` when it is none.

    So no lock is asked for or held, whoever else reads the file or puts the next view in its place.
    """
    import h5py

    try:
        return h5py.File(io.BytesIO(path.read_bytes()), "r")
    except OSError as error:
        raise DamagedFileError(f"cannot be read as a run file: {error}", where=str(path)) from error


def _uuid(path: Path) -> str:
    try:
        with open_view(path) as file:
            return bytes(file["/entry/entry_identifier_uuid"][()]).decode()
    except (DamagedFileError, KeyError, RuntimeError, OSError):
        return ""
