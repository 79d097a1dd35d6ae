"""One owner for each address, on this computer.

It owns the lock files. They are advisory: they keep polrig from polrig, not from other programs. The kernel
lets go of a dead owner's lock, so a file that was left behind never refuses anybody.
"""

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
        path = Path(tempfile.gettempdir()) / f"polrig-{name}.lock"
        try:
            self._fd = _open_for_all(path)
        except OSError as error:
            what, do = f"its lock cannot be opened ({error.strerror})", f"see who may write {path}"
            raise BusyError(what, address=address, do=do) from error
        try:
            fcntl.flock(self._fd, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except OSError as error:
            owner = os.pread(self._fd, 20, 0).decode("ascii", "replace").strip()
            self.close()
            what, do = f"process {owner or '?'} is using it", "let that run end, or stop it"
            raise BusyError(what, address=address, do=f"{do}; the lock is {path}") from error
        os.ftruncate(self._fd, 0)
        os.pwrite(self._fd, f"{os.getpid()}\n".encode(), 0)

    def close(self) -> None:
        """Let go; a second call does nothing."""
        fd, self._fd = self._fd, -1
        if fd >= 0:
            os.close(fd)


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
