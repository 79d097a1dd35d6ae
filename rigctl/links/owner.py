"""One owner for each address, on this computer.

It owns the lock files. They are advisory: they keep polrig from polrig, not from other programs. An owner
takes its file away; one that died leaves it, but the kernel has let go of its lock, so it refuses nobody.
"""

import contextlib
import fcntl
import os
import tempfile
from pathlib import Path

from rigctl.errors import BusyError


class Ownership:
    """A hold on one address, from construction to `close`; `BusyError` while somebody else has it.

    `place` is what the address leads to: two names of one port are one place.
    """

    def __init__(self, address: str, *, place: str) -> None:
        name = "".join(c if c.isalnum() else "-" for c in place)
        self._path = Path(tempfile.gettempdir()) / f"polrig-{name}.lock"
        try:
            self._fd = _locked(self._path)
        except BlockingIOError as error:
            what, do = f"process {_owner_of(self._path)} is using it", "let that run end, or stop it"
            raise BusyError(what, address=address, do=f"{do}; the lock is {self._path}") from error
        except OSError as error:
            what, do = f"its lock cannot be opened ({error.strerror})", f"see who may write {self._path}"
            raise BusyError(what, address=address, do=do) from error
        os.ftruncate(self._fd, 0)
        os.pwrite(self._fd, f"{os.getpid()}\n".encode(), 0)

    def close(self) -> None:
        """Let go; a second call does nothing."""
        fd, self._fd = self._fd, -1
        if fd >= 0:
            with contextlib.suppress(OSError):  # somebody else's file in a shared directory stays
                self._path.unlink()
            os.close(fd)


def _locked(path: Path) -> int:
    """Open and lock a lock file; `BlockingIOError` while somebody has it."""
    while True:
        fd = _open_for_all(path)
        try:
            fcntl.flock(fd, fcntl.LOCK_EX | fcntl.LOCK_NB)
            if os.path.samestat(os.fstat(fd), os.stat(path)):
                return fd
        except FileNotFoundError:
            pass  # its owner took it away in between, and with it the lock's meaning: once more
        except OSError:
            os.close(fd)
            raise
        os.close(fd)


def _owner_of(path: Path) -> str:
    try:
        return path.read_text("ascii", "replace").strip() or "?"
    except OSError:  # it has just let go
        return "?"


def _open_for_all(path: Path) -> int:
    """Open a lock file that other people of this computer can open too, whoever made it."""
    flags = os.O_RDWR | os.O_CLOEXEC | os.O_NOFOLLOW
    try:
        return os.open(path, flags)
    except FileNotFoundError:
        # a kernel may refuse O_CREAT on somebody else's file in a shared directory, hence two attempts
        fd = os.open(path, flags | os.O_CREAT, 0o666)
        os.fchmod(fd, 0o666)
        return fd
