"""The operating system's errors in our own words."""

import errno
import os
import socket

import pytest

from rigctl.links.foreign import disconnected


@pytest.mark.parametrize(
    ("code", "words"),
    [
        (errno.ECONNREFUSED, "nobody listens"),
        (errno.ECONNRESET, "closed the connection"),
        (errno.EPIPE, "closed the connection"),
        (errno.ETIMEDOUT, "no longer answers"),
        (errno.EHOSTUNREACH, "no way leads"),
        (errno.ENETUNREACH, "no way leads"),
        (errno.ENOENT, "no such port"),
        (errno.EACCES, "may not be opened"),
        (errno.EIO, "the port is gone"),
        (errno.ENETDOWN, "the connection failed"),
    ],
)
def test_each_cause_is_told_with_where_and_what_to_do(code: int, words: str) -> None:
    error = disconnected(OSError(code, os.strerror(code)), "tcp://h:1", partial=b"1.2")

    assert words in error.what
    assert (error.where, error.partial) == ("tcp://h:1", b"1.2")
    assert error.do


def test_a_close_in_order_is_told_as_what_it_is() -> None:
    assert "closed the connection" in disconnected(None, "tcp://h:1").what


def test_an_unknown_host_is_told_apart_from_a_deaf_one() -> None:
    error = disconnected(socket.gaierror(socket.EAI_NONAME, "Name or service not known"), "tcp://h:1")

    assert "name is not known (Name or service not known)" in error.what


def test_an_error_without_a_number_is_still_told() -> None:
    assert "the connection failed (odd)" in disconnected(OSError("odd"), "tcp://h:1").what
