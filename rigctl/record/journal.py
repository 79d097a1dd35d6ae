"""The journal of a run: one line a record, only ever appended to, the truth until the run file is whole.

A line is `CRC LENGTH JSON`: the CRC-32 of the JSON bytes in hexadecimal, continued from the line before, and
their length. Chaining makes a line of another run or of another place in the file worthless, so whatever a
crash leaves behind the last acknowledged record (nothing, half a line, zeros, old disk blocks) is never taken
for a record. A person can read it with any pager. It knows nothing of HDF5.
"""

import fcntl
import json
import math
import os
import re
import zlib
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from rigctl.errors import RecordError

_encode = json.JSONEncoder(ensure_ascii=False, allow_nan=False, check_circular=False, separators=(",", ":")).encode
_LINE_START = re.compile(rb"([0-9a-f]{8}) ([0-9]{1,10}) ")


def journal_path(path: Path) -> Path:
    """Where the journal of a run file lies."""
    return path.with_name(path.name + ".journal")


@dataclass(frozen=True, slots=True)
class JournalContent:
    """Whole records of a journal; `size` counts their bytes, `tail` is what follows them."""

    records: tuple[Mapping[str, Any], ...]
    size: int
    tail: bytes


def parse_journal(data: bytes) -> JournalContent:
    """Return the longest whole prefix of a journal's records."""
    records: list[Mapping[str, Any]] = []
    place, crc = 0, 0
    while (found := _payload(data, place, crc)) is not None:
        payload, crc, place = found
        records.append(json.loads(payload))
    return JournalContent(tuple(records), place, data[place:])


def _payload(data: bytes, place: int, crc: int) -> tuple[bytes, int, int] | None:
    start = _LINE_START.match(data, place)
    if start is None:
        return None
    end = start.end() + int(start[2])
    payload = data[start.end() : end]
    if data[end : end + 1] != b"\n" or zlib.crc32(payload, crc) != int(start[1], 16):
        return None
    return payload, int(start[1], 16), end + 1


def frame(record: Mapping[str, Any], crc: int) -> tuple[bytes, int]:
    """Return the line of a record after a line with this CRC, and the new CRC.

    Numbers keep every bit; what is not finite becomes null.
    """
    try:
        text = _encode(record)
    except ValueError:
        text = _encode(_finite(record))
    # a lone surrogate (an undecodable byte of a command line) becomes the JSON escape of itself
    payload = text.encode("utf-8", "backslashreplace")
    crc = zlib.crc32(payload, crc)
    return b"%08x %d %b\n" % (crc, len(payload), payload), crc


def _finite(value: Any) -> Any:
    if isinstance(value, float):
        return value if math.isfinite(value) else None
    if isinstance(value, Mapping):
        return {key: _finite(entry) for key, entry in value.items()}
    if isinstance(value, list | tuple):
        return [_finite(entry) for entry in value]
    return value


class Journal:
    """The one writer of a journal, holding its lock.

    After a failed write or sync nothing more is accepted: what the disk holds is then unknown, and asking it
    again would report success for data that are gone (fsync clears an error once it was told).
    """

    def __init__(self, path: Path, *, durable: bool) -> None:
        self.path, self.size = path, 0
        self._durable, self._crc = durable, 0
        self._failure: RecordError | None = None
        try:
            self._fd = os.open(path, os.O_CREAT | os.O_EXCL | os.O_APPEND | os.O_RDWR, 0o644)
        except FileExistsError as error:
            raise RecordError(
                "a journal lies there: a run is being recorded, or one was interrupted",
                where=str(path),
                do="choose another name; `polrig verify` of the run file folds an interrupted run",
            ) from error
        except OSError as error:
            raise RecordError(f"cannot be written: {error.strerror}", where=str(path)) from error
        # waits for the blink of an eye in which a reader may hold the lock to see whether anybody writes
        fcntl.flock(self._fd, fcntl.LOCK_EX)

    def append(self, record: Mapping[str, Any]) -> None:
        """Add a record; when durable it is on the disk once this returns."""
        if self._failure is not None:
            raise self._failure
        line, crc = frame(record, self._crc)
        try:
            self._write(line)
        except OSError as error:
            self._failure = RecordError(
                f"the disk refused a record: {error.strerror}",
                where=str(self.path),
                do="make room or mend the disk; every record before is kept, and `polrig verify` folds them",
            )
            raise self._failure from error
        self.size += len(line)
        self._crc = crc

    def content(self) -> bytes:
        """Every acknowledged byte."""
        return os.pread(self._fd, self.size, 0)

    def close(self) -> None:
        """Let go of the lock; the journal stays where it is."""
        if self._fd >= 0:
            os.close(self._fd)
            self._fd = -1
            self._failure = RecordError("this run is closed", where=str(self.path))

    def _write(self, line: bytes) -> None:
        # a disk that fills up takes a part first and gives its reason at the next call
        while line:
            line = line[os.write(self._fd, line) :]
        if self._durable:
            os.fdatasync(self._fd)
