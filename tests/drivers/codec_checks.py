"""The one way in which every parser of a driver is tested: whole, cut, lengthened and mutated.

A parser may refuse with `FramingError`, which carries the address, and with nothing else.
"""

from collections.abc import Callable
from dataclasses import dataclass

from hypothesis import strategies as st
from scripted_twin import ADDRESS

from rigctl.errors import FramingError

TAILS = (b"\x00", b"\xff", b" ", b";", b",", b'"', b">", b"1", b"E", b"\r", b"ok", b"<Idle|MPos:0.000>")

Parse = Callable[[bytes], object]


@dataclass(frozen=True, slots=True)
class Sample:
    """A whole line and its value; `is_closed` lines are no lines at all when they are cut anywhere."""

    name: str
    parse: Parse
    whole: bytes
    value: object
    is_closed: bool = False


def is_refused(parse: Parse, data: bytes) -> bool:
    """Parse; anything but a value or the documented error fails the test."""
    refusal: FramingError | None = None
    try:
        parse(data)
    except FramingError as error:
        refusal = error
    assert refusal is None or (refusal.address == ADDRESS and refusal.do)
    return refusal is not None


def check_sample(sample: Sample) -> None:
    """Test a parser with a whole line, every cut of it, garbage after it and every byte changed."""
    parse, whole = sample.parse, sample.whole
    assert parse(whole) == sample.value
    refused_cuts = [is_refused(parse, whole[:end]) for end in range(len(whole))]
    assert all(refused_cuts) or not sample.is_closed
    for tail in TAILS:
        is_refused(parse, whole + tail)
    for place in range(len(whole)):
        for byte in range(256):
            is_refused(parse, whole[:place] + bytes((byte,)) + whole[place + 1 :])


@st.composite
def mutated(draw: st.DrawFn, whole: bytes) -> bytes:
    """Cut pieces out of a line, repeat pieces of it and put noise between."""
    pieces = []
    for _ in range(draw(st.integers(1, 4))):
        start = draw(st.integers(0, len(whole)))
        pieces.append(whole[start : draw(st.integers(start, len(whole)))])
        pieces.append(draw(st.one_of(st.just(b""), st.binary(max_size=6), st.sampled_from(TAILS))))
    return b"".join(pieces)
