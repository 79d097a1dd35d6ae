"""Pieces of scripts that instruments of the SCPI family share."""

from scripted_twin import Bench

from rigctl_drivers.scpi_family import SCPI, nonces

QUEUE = b"SYSTEM:ERROR:NEXT?\n"
NO_ERROR = b'0,"No error"\n'


def expect_resync(bench: Bench, *, before: bytes = b"", after_s: float = 0.0, now_s: float = 0.0) -> None:
    """Script the two numbers of a resync that begins at an instant, with stale bytes before them."""
    first, second = nonces(now_s + SCPI.longest_s)
    sent = f"\n*ESE {first};*ESE?\n*ESE {second};*ESE?\n*ESE 0\n".encode()
    bench.twin.expect(sent, before + f"{first}\n{second}\n".encode(), after_s=after_s)
