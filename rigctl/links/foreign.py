"""What the operating system says of a connection, in our own words: the one place that translates it.

It owns the table; it opens, reads and catches nothing itself.
"""

import errno
import socket

from rigctl.errors import DisconnectedError

_CLOSED = ("the instrument closed the connection", "see whether it restarted, or serves somebody else")
_NO_WAY = ("no way leads to this host", "check the cable and the host's address")

_MEANINGS = {
    errno.ECONNREFUSED: ("nobody listens there", "switch the instrument on, and check host and port"),
    errno.ECONNRESET: _CLOSED,
    errno.EPIPE: _CLOSED,
    errno.ETIMEDOUT: ("the instrument no longer answers the network", "check its power and its cable"),
    errno.EHOSTUNREACH: _NO_WAY,
    errno.ENETUNREACH: _NO_WAY,
    errno.ENOENT: ("there is no such port", "plug the instrument in, and see which port it gets"),
    errno.EACCES: ("this port may not be opened", "let the administrator add you to the group that owns it"),
    errno.EIO: ("the port is gone", "plug the instrument in again"),
}


def disconnected(error: OSError | None, address: str, *, partial: bytes = b"") -> DisconnectedError:
    """Translate an error of the operating system; None: the other side closed in order."""
    if error is None:
        what, do = _CLOSED
    elif isinstance(error, socket.gaierror):
        what, do = f"the host's name is not known ({error.strerror})", "check the host's name"
    else:
        fallback = f"the connection failed ({error})", "check the instrument and its cable"
        what, do = _MEANINGS.get(error.errno or 0, fallback)
    return DisconnectedError(what, address=address, partial=partial, do=do)
