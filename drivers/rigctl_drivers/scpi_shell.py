"""One exchange each: ask, set and read back, identify, on the link of an SCPI instrument.

It owns how a refusal is found and told. It knows no instrument, never repeats a command and never waits.
"""

from rigctl.errors import FramingError, RefusedError, WrongInstrumentError
from rigctl.interfaces import Identity
from rigctl.links.link import Link
from rigctl_drivers.reading import reading
from rigctl_drivers.scpi_codec import (
    ERROR_QUERY,
    Complaint,
    format_number,
    is_same_number,
    is_same_word,
    parse_complaint,
    parse_identity,
    parse_number,
    parse_reply,
    parse_text,
)
from rigctl_drivers.scpi_family import MOST_COMPLAINTS


def ask(link: Link, *queries: str, timeout_s: float | None = None) -> tuple[str, ...]:
    """Ask several queries and the error queue in one message; return the values.

    A first entry that is a command rather than a query (`HEADER 1;:HEADER?`) goes along with its query.

    Raises
    ------
    RefusedError
        The instrument complains; its error queue was emptied, and its first entry is the code and text.
    FramingError
        The reply is none, or has another number of values; the link is out of step then.
    """
    message = ";:".join((*queries, ERROR_QUERY))
    (line,) = link.exchange(f"{message}\n".encode(), timeout_s=timeout_s)
    with reading(link) as address:
        reply = parse_reply(line, values=len(queries), address=address)
    if reply.complaint.code:
        _drain(link)
        raise refused(link, message, reply.complaint)
    return reply.values


def set_number(link: Link, header: str, value: float) -> float:
    """Set a number, read it back and return what was read back.

    Raises
    ------
    RefusedError
        The instrument complains, or what it reads back differs beyond rounding.
    """
    argument = format_number(value)
    (text,) = ask(link, f"{header} {argument};:{header}?")
    with reading(link) as address:
        answer = parse_number(text, address=address)
    if not is_same_number(value, text):
        raise not_taken(link, header, asked=argument, answer=text)
    return answer


def set_word(link: Link, header: str, word: str, *, answer: str | None = None) -> None:
    """Set a mnemonic and read it back; `answer` is what it reads back as, where not as itself."""
    (text,) = ask(link, f"{header} {word};:{header}?")
    if not is_same_word(answer or word, text):
        raise not_taken(link, header, asked=word, answer=text)


def identify(link: Link, *, kind: str, probe: str) -> Identity:
    """Clear the error queue and ask who is there; then ask something that only this kind of instrument knows.

    Raises
    ------
    WrongInstrumentError
        The answer is no identity, or the instrument does not know the question.
    """
    (line,) = link.exchange(b"*CLS;*IDN?\n")
    try:
        with reading(link) as address:
            identity = parse_identity(line, address=address)
        ask(link, probe)
    except FramingError as error:
        raise _wrong(link, f"no {kind} of this family: it answered {error.partial[:80]!r}") from error
    except RefusedError as error:
        if not -199 <= error.code <= -100:
            raise
        raise _wrong(link, f"'{identity.model}', which is no {kind}: {error.code} {error.text}") from error
    return identity


def refused(link: Link, message: str, complaint: Complaint) -> RefusedError:
    """Make the error for what the instrument complains of."""
    return RefusedError(
        f"the instrument refused '{message}': {complaint.code} {complaint.text}",
        address=link.address,
        code=complaint.code,
        text=complaint.text,
        do="compare the setting with the instrument's manual and with its options in the rig file",
    )


def not_taken(link: Link, header: str, *, asked: str, answer: str) -> RefusedError:
    """Make the error for a setting that reads back as another."""
    return RefusedError(
        f"{header} was set to {asked} but reads back {answer}",
        address=link.address,
        code=0,
        text=answer,
        do="ask for a setting that the instrument has, or see whether somebody else sets it",
    )


def _drain(link: Link) -> None:
    for _ in range(MOST_COMPLAINTS):
        (line,) = link.exchange(f"{ERROR_QUERY}\n".encode())
        with reading(link) as address:
            if parse_complaint(parse_text(line, address=address), address=address).code == 0:
                return


def _wrong(link: Link, what: str) -> WrongInstrumentError:
    return WrongInstrumentError(
        f"this is {what}",
        where=link.address,
        do="check the address and the driver of this instrument in the rig file",
    )
