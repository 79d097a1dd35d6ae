"""Pieces of scripts that instruments of the SCPI family share."""

from scripted_twin import Bench

from rigctl_drivers.scpi_family import SCPI, nonces

QUEUE = b"SYSTEM:ERROR:NEXT?\n"
NO_ERROR = b'0,"No error"\n'


def expect_first_number(bench: Bench, *, before: bytes = b"", after_s: float = 0.0, now_s: float = 0.0) -> None:
    """Script a resync that comes no further than its first number."""
    first, _ = nonces(now_s + SCPI.longest_s)
    bench.twin.expect(f"\n*ESE {first};*ESE?\n".encode(), before + f"{first}\n".encode(), after_s=after_s)


def expect_resync(bench: Bench, *, before: bytes = b"", after_s: float = 0.0, now_s: float = 0.0) -> None:
    """Script the two numbers of a resync that begins at an instant, with stale bytes before them."""
    _, second = nonces(now_s + SCPI.longest_s)
    expect_first_number(bench, before=before, after_s=after_s, now_s=now_s)
    bench.twin.expect(f"*ESE {second};*ESE?\n".encode(), f"{second}\n".encode())
    bench.twin.expect(b"*ESE 0\n")
