"""The messages of HiSLIP by themselves: whole, byte by byte, and what is none."""

import itertools

import pytest
from hypothesis import given
from hypothesis import strategies as st

from rigctl.errors import FramingError
from rigctl.links.hislip_messages import LONGEST_CONTROL_BYTES, Kind, MessageReader, Piece

# IVI-6.1, the example of a session that begins: version 1.0, vendor "xx", sub-address "hislip0"
INITIALIZE = b"HS\x00\x00" + b"\x01\x00xx" + bytes([0, 0, 0, 0, 0, 0, 0, 7]) + b"hislip0"


def pieces_of(*chunks: bytes) -> list[Piece]:
    reader = MessageReader("visa://x")
    found = []
    for chunk in chunks:
        reader.add(chunk)
        while (piece := reader.take()) is not None:
            found.append(piece)
    return found


def joined(pieces: list[Piece]) -> list[Piece]:
    """The whole messages of pieces that came in parts."""
    whole: list[Piece] = []
    payload = b""
    for piece in pieces:
        payload += piece.payload
        if piece.is_last:
            whole.append(Piece(piece.kind, piece.control, piece.parameter, payload))
            payload = b""
    return whole


def test_a_message_is_packed_as_the_standard_shows_it() -> None:
    parameter = int.from_bytes(b"\x01\x00xx")

    assert Piece(Kind.INITIALIZE, 0, parameter, b"hislip0").pack() == INITIALIZE


def test_a_message_is_read_as_the_standard_shows_it() -> None:
    assert pieces_of(INITIALIZE) == [Piece(Kind.INITIALIZE, 0, int.from_bytes(b"\x01\x00xx"), b"hislip0")]


messages = st.builds(
    Piece,
    st.integers(min_value=0, max_value=255),
    st.integers(min_value=0, max_value=255),
    st.integers(min_value=0, max_value=2**32 - 1),
    st.binary(max_size=40),
)


@given(st.lists(messages, max_size=4), st.lists(st.integers(min_value=0, max_value=200), max_size=6))
def test_messages_come_back_however_they_are_cut(sent: list[Piece], cuts: list[int]) -> None:
    stream = b"".join(message.pack() for message in sent)
    edges = [0, *sorted(min(cut, len(stream)) for cut in cuts), len(stream)]

    found = pieces_of(*(stream[begin:end] for begin, end in itertools.pairwise(edges)))

    assert joined(found) == sent


@given(st.lists(messages, max_size=3))
def test_messages_come_back_byte_by_byte(sent: list[Piece]) -> None:
    stream = b"".join(message.pack() for message in sent)

    assert joined(pieces_of(*(bytes([byte]) for byte in stream))) == sent


def test_data_are_given_out_as_they_come_and_other_messages_whole() -> None:
    data, other = Piece(Kind.DATA, 0, 8, b"1.23").pack(), Piece(Kind.ERROR, 1, 0, b"what").pack()

    assert [piece.payload for piece in pieces_of(data[:18], data[18:])] == [b"1.", b"23"]
    assert [piece.payload for piece in pieces_of(other[:18], other[18:])] == [b"what"]


def test_a_message_without_payload_ends_at_once() -> None:
    (piece,) = pieces_of(Piece(Kind.DATA_END, 0, 8).pack())

    assert piece.is_last
    assert piece.payload == b""


def test_only_data_belong_to_what_is_said() -> None:
    assert [kind for kind in Kind if Piece(kind).is_data] == [Kind.DATA, Kind.DATA_END]


@pytest.mark.parametrize(
    ("stream", "why"),
    [
        (b"HTTP/1.1 400 Bad Request\r\n", "begins no message"),
        (b'+0,"No error"\n' + b" " * 16, "begins no message"),
        (Piece(Kind.ERROR, 0, 0, b"x" * (LONGEST_CONTROL_BYTES + 1)).pack(), "claims 4097 bytes"),
    ],
)
def test_what_is_no_message_is_a_framing_error(stream: bytes, why: str) -> None:
    with pytest.raises(FramingError, match=why) as caught:
        pieces_of(stream)

    assert caught.value.address == "visa://x"
