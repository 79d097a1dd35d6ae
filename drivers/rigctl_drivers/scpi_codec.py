"""What SCPI instruments write: bytes in, values out.

It owns the grammar of replies and the text of commands. It does no I/O and knows no instrument. What is no
reply raises `FramingError`, and nothing else.
"""

import math
import re
from dataclasses import dataclass

from rigctl.errors import FramingError
from rigctl.interfaces import Flag, Identity
from rigctl.links.numbers import NotAReading, parse_real

ERROR_QUERY = "SYSTEM:ERROR:NEXT?"
"""Source: SCPI-1999 volume 2, chapter 21; from memory."""

_COMPLAINT = re.compile(r'([+-]?[0-9]{1,6}) *, *"((?:[^"]|"")*)"')
_ROUNDING = 1e-3
"""Relative; a read back that is shorter than what was asked is taken as rounded up to this."""
_PRINTED = 1e-6
"""Relative; seven digits, fewer than a number in single precision keeps."""
_REGISTER = re.compile(r"[+-]?[0-9]{1,5}")
_SHOWN = {NotAReading.OVER: math.inf, NotAReading.UNDER: -math.inf, NotAReading.NAN: math.nan}
_NO_FLAG = Flag(0)
_FLAGS = {
    NotAReading.OVER: Flag.OVERLOAD,
    NotAReading.UNDER: Flag.UNDERRANGE,
    NotAReading.NAN: Flag.NOT_A_NUMBER,
}


@dataclass(frozen=True, slots=True)
class Complaint:
    """One entry of an instrument's error queue; code 0 is none."""

    code: int
    text: str


@dataclass(frozen=True, slots=True)
class Reply:
    """The values of a compound reply and what stood at the end of it."""

    values: tuple[str, ...]
    complaint: Complaint


def parse_text(line: bytes, *, address: str) -> str:
    """Read a reply line as text: printable ASCII and nothing else."""
    text = line.decode("latin-1")
    if not (text.isascii() and text.isprintable()):
        raise no_reply("bytes that are no text", line, address=address)
    return text


def split_outside_quotes(text: str, separator: str, *, address: str) -> tuple[str, ...]:
    """Cut a reply at a separator, but not within double quotes; a doubled quote stands for itself.

    Source
    ------
    IEEE 488.2-1992, string response data and response message unit separator; from memory.
    """
    pieces = text.split('"')  # every other one stands within quotes
    if len(pieces) % 2 == 0:
        raise no_reply("a quote that is not closed", text.encode(), address=address)
    parts = pieces[0].split(separator)
    for quoted, plain in zip(pieces[1::2], pieces[2::2], strict=True):
        first, *more = plain.split(separator)
        parts[-1] += f'"{quoted}"{first}'
        parts += more
    return tuple(part.strip() for part in parts)


def parse_complaint(text: str, *, address: str) -> Complaint:
    """Read an entry of the error queue: `-113,"Undefined header;FOO"`; a sign may lead the number.

    Source
    ------
    SCPI-1999 volume 2, 21.8.2; from memory.
    """
    found = _COMPLAINT.fullmatch(text.strip())
    if found is None:
        raise no_reply("no entry of an error queue", text.encode(), address=address)
    return Complaint(int(found[1]), found[2].replace('""', '"'))


def parse_reply(line: bytes, *, values: int, address: str) -> Reply:
    """Read a compound reply: so many values, then an entry of the error queue.

    A query that fails sends no value, so the number of values is checked only where nothing is complained of.
    """
    *found, last = split_outside_quotes(parse_text(line, address=address), ";", address=address)
    complaint = parse_complaint(last, address=address)
    if complaint.code == 0 and (len(found) != values or "" in found):
        raise no_reply(f"{len(found)} values instead of {values}", line, address=address)
    return Reply(tuple(found), complaint)


def parse_identity(line: bytes, *, address: str) -> Identity:
    """Read the answer to `*IDN?`: maker, model, serial number, firmware; 0 stands for what is not known.

    Source
    ------
    IEEE 488.2-1992, 10.14; from memory.
    """
    fields = [field.strip() for field in parse_text(line, address=address).split(",", 3)]
    if len(fields) < 4 or not fields[1]:
        raise no_reply("no identity", line, address=address)
    return Identity(*("" if field == "0" else field for field in fields))


def parse_bool(text: str, *, address: str) -> bool:
    """Read a boolean: `0` or `1`, nothing else.

    Source
    ------
    SCPI-1999 volume 1, 7.3: queries of booleans return 1 or 0; from memory.
    """
    if text not in ("0", "1"):
        raise no_reply("neither 0 nor 1", text.encode(), address=address)
    return text == "1"


def parse_number(text: str, *, address: str) -> float:
    """Read the number of a setting; an overload or a not-a-number is none."""
    real = parse_real(text, address=address)
    if real.flag is not None:
        raise no_reply("no number a setting can have", text.encode(), address=address)
    return real.value


def parse_numbers(text: str, *, count: int, address: str) -> tuple[float, ...]:
    """Read the numbers of a setting that has several."""
    parts = text.split(",")
    if len(parts) != count:
        raise no_reply(f"{len(parts)} numbers instead of {count}", text.encode(), address=address)
    return tuple(parse_number(part, address=address) for part in parts)


def parse_reading(text: str, *, address: str) -> float:
    """Read what an instrument measures; infinite beyond what it can show, NaN where it measures nothing."""
    real = parse_real(text, address=address)
    return real.value if real.flag is None else _SHOWN[real.flag]


def parse_register(text: str, *, address: str) -> int:
    """Read the bits of a status register.

    Source
    ------
    IEEE 488.2-1992, NR1 response data; SCPI-1999 volume 1, 5.1: registers have 16 bits, of which the highest is 0;
    from memory.
    """
    if not _REGISTER.fullmatch(text) or not 0 <= int(text) < 1 << 15:
        raise no_reply("no status register", text.encode(), address=address)
    return int(text)


def parse_readings(text: str, *, count: int, address: str) -> tuple[tuple[float, ...], Flag]:
    """Read a block of readings; one that is none is NaN and adds its flag."""
    reals = [parse_real(part, address=address) for part in text.split(",")]
    if len(reals) != count:
        raise no_reply(f"{len(reals)} readings instead of {count}", text.encode(), address=address)
    flags = _NO_FLAG
    for real in reals:
        if real.flag is not None:
            flags |= _FLAGS[real.flag]
    return tuple(real.value for real in reals), flags


def parse_length_unit_m(text: str, *, address: str) -> float:
    """Tell the unit in which a head answers a wavelength, m: above 1e-3 the number can only be nm."""
    return 1e-9 if parse_number(text, address=address) > 1e-3 else 1.0


def format_number(value: float) -> str:
    """Write a number so that every digit that matters is sent."""
    return f"{value:.9G}"


def is_same_number(asked: float, text: str, *, scale: float = 1.0, step: float = 0.0) -> bool:
    """Whether a number read back is the one asked for, rounded to the digits that the instrument shows.

    Parameters
    ----------
    asked
        What was set.
    text
        What was read back, as it was written; it has been parsed before.
    scale
        Size of the unit of `text` in the unit of `asked`.
    step
        Size of the instrument's own steps, to which it rounds, in the unit of `asked`; 0 where unknown.
    """
    mantissa, _, exponent = text.strip().upper().partition("E")
    last_digit = float(f"1E{exponent or 0}") * 10.0 ** -len(mantissa.partition(".")[2])
    allowed = min(max(0.51 * last_digit * scale, _PRINTED * abs(asked)), _ROUNDING * abs(asked))
    return math.isclose(asked, float(text) * scale, rel_tol=0.0, abs_tol=max(allowed, 0.51 * step))


def is_same_word(asked: str, text: str) -> bool:
    """Whether a mnemonic read back is the one asked for, in its long or short form: `ASC,0` is `ASCII`."""
    word = text.partition(",")[0].strip().strip('"').upper()
    return word == asked or (len(word) >= 3 and asked.startswith(word))


def no_reply(what: str, got: bytes, *, address: str) -> FramingError:
    """Make the error for bytes that are no reply."""
    return FramingError(
        f"the instrument sent {what}: {got[:80]!r}",
        address=address,
        partial=got,
        do="check that the driver fits this instrument and its firmware",
    )
