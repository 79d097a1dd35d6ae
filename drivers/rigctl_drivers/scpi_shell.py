"""One exchange each: ask, set and read back, identify, on the link of an SCPI instrument.

It owns how a refusal is found and told. It knows no instrument and never waits; a command that must arrive is the
only one that it sends twice.
"""

from collections.abc import Sequence
from contextlib import suppress

from rigctl.errors import FramingError, LinkError, RefusedError, WrongInstrumentError
from rigctl.interfaces import Identity
from rigctl.links.link import Link
from rigctl_drivers.reading import reading
from rigctl_drivers.scpi_codec import (
    ERROR_QUERY,
    Complaint,
    Reply,
    format_number,
    is_same_number,
    is_same_word,
    parse_complaint,
    parse_identity,
    parse_numbers,
    parse_reply,
    parse_text,
)
from rigctl_drivers.scpi_family import MOST_COMPLAINTS

QUESTIONABLE = "STATUS:QUESTIONABLE:CONDITION?"
"""What is wrong now, as bits. Source: SCPI-1999 volume 2, STATus subsystem; from memory."""


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
    reply = look(link, *queries, timeout_s=timeout_s)
    if reply.complaint.code:
        raise refused(link, *queries, complaint=reply.complaint)
    return reply.values


def look(link: Link, *queries: str, timeout_s: float | None = None) -> Reply:
    """Ask as `ask` does, but let a complaint stand beside values that are all there.

    An instrument that protects itself complains on its own account; whoever looks why must still see its state.

    Raises
    ------
    RefusedError
        The instrument complains, and a value is missing. Either way its error queue was emptied.
    FramingError
        As `ask`.
    """
    message = ";:".join((*queries, ERROR_QUERY))
    (line,) = link.exchange(f"{message}\n".encode(), timeout_s=timeout_s)
    with reading(link) as address:
        reply = parse_reply(line, values=len(queries), address=address)
    if reply.complaint.code:
        _drain(link)
        if len(reply.values) != len(queries):
            raise refused(link, *queries, complaint=reply.complaint)
    return reply


def insist(link: Link, command: str, query: str) -> str:
    """Send a command that must arrive whatever is wrong, then send it again and read back.

    The first time it goes out ahead of a resync and of everything that may fail; what the instrument complains of
    does not hide its answer.

    Raises
    ------
    LinkError, RefusedError
        No answer, though the command may have been obeyed.
    """
    with suppress(LinkError):
        link.interrupt(f"\n{command}\n".encode())  # the LF ends a message that was sent in part
    (text,) = look(link, f"{command};:{query}").values
    return text


def set_number(link: Link, header: str, value: float, *, step: float = 0.0) -> float:
    """Set a number, read it back and return what was read back.

    Parameters
    ----------
    step
        To which the instrument rounds, where that is known.

    Raises
    ------
    RefusedError
        The instrument complains, or what it reads back differs beyond rounding.
    """
    (answer,) = set_numbers(link, header, (value,), step=step)
    return answer


def set_numbers(link: Link, header: str, values: Sequence[float], *, step: float = 0.0) -> tuple[float, ...]:
    """Set the numbers of one setting as `set_number` does."""
    argument = ",".join(map(format_number, values))
    (text,) = ask(link, f"{header} {argument};:{header}?")
    with reading(link) as address:
        answers = parse_numbers(text, count=len(values), address=address)
    if not all(is_same_number(value, part, step=step) for value, part in zip(values, text.split(","), strict=True)):
        raise not_taken(link, header, asked=argument, answer=text)
    return answers


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


def refused(link: Link, *queries: str, complaint: Complaint) -> RefusedError:
    """Make the error for what the instrument complains of."""
    return RefusedError(
        f"the instrument refused '{';:'.join(queries)}': {complaint.code} {complaint.text}",
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
