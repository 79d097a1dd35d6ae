"""From the bytes of a program message to its commands.

It owns units, headers and paths: IEEE 488.2, chapter 7, and SCPI-1999 volume 1, chapter 6. It executes
nothing.
"""

import itertools
import re
from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass

from rigctl_sim.scpi.complaint import Complaint
from rigctl_sim.scpi.mnemonic import forms
from rigctl_sim.scpi.parameters import Parameter


@dataclass(frozen=True, slots=True)
class Wait:
    """What a command gives that cannot be done yet: go on at an instant, with `then` for what it answers."""

    until_s: float
    then: Callable[[float], "str | Wait | None"]


Act = Callable[..., "str | Wait | None"]


@dataclass(frozen=True, slots=True)
class Command:
    """A command of an instrument.

    Parameters
    ----------
    pattern
        As the standard prints it: capitals are the short form, brackets stand around nodes that may be left
        out, `#` stands once, where a mnemonic may bear the number of its channel, a final `?` makes it a query:
        `[SENSe#]:POWer[:DC]:RANGe?`.
    act
        Called with the instant and the parameters; what a query answers is its text.
    takes
        Readers of the parameters, in order.
    needs
        How many of them must be there; None: all.
    channel
        The numeric suffix that means it; 1 may be left out.
    """

    pattern: str
    act: Act
    takes: tuple[Parameter, ...] = ()
    needs: int | None = None
    channel: int = 1

    @property
    def is_query(self) -> bool:
        """Whether it answers."""
        return self.pattern.endswith("?")


@dataclass(frozen=True, slots=True)
class Unit:
    """One command of a message with its parameters, or the complaint that stands in its place."""

    act: Act | None
    values: tuple[object, ...] = ()
    is_query: bool = False
    complaint: int = 0


_NODE = re.compile(r"(\[?):?(\*?[A-Za-z]+)(#?):?(\]?)")
_HEADER = re.compile(r"(:?)((?:\*[A-Za-z]+|[A-Za-z]\w*(?::[A-Za-z]\w*)*)\??)(?:\s+(.*))?", re.ASCII | re.DOTALL)
_SUFFIX = re.compile(r"(\d+)(?=[:?]|$)")
_LONGEST_MNEMONIC = 12


def _spellings(pattern: str) -> Iterator[tuple[str, tuple[bool, ...]]]:
    """Every way of sending a header, in capitals, and which of its nodes may bear a suffix."""
    options: list[list[tuple[str, bool] | None]] = []
    for bracket, mnemonic, suffix, _ in _NODE.findall(pattern.rstrip("?")):
        spelled: list[tuple[str, bool] | None] = [(form, bool(suffix)) for form in forms(mnemonic)]
        options.append([*spelled, None] if bracket else spelled)
    end = "?" if pattern.endswith("?") else ""
    for picked in itertools.product(*options):
        nodes = [node for node in picked if node is not None]
        yield ":".join(word for word, _ in nodes) + end, tuple(may for _, may in nodes)


class Grammar:
    """The commands of one instrument, found by any of their spellings; parsed messages are kept."""

    _MOST_KEPT = 512

    def __init__(self, commands: Iterable[Command]) -> None:
        self._commands: dict[str, dict[int, Command]] = {}
        self._may_have_suffix: dict[str, tuple[bool, ...]] = {}
        for command in commands:
            for spelling, may in _spellings(command.pattern):
                self._commands.setdefault(spelling, {})[command.channel] = command
                self._may_have_suffix[spelling] = may
        self._kept: dict[bytes, tuple[Unit, ...]] = {}

    def parse(self, message: bytes) -> tuple[Unit, ...]:
        """Return the units of a message in order; the first command error ends it."""
        units = self._kept.get(message)
        if units is None:
            units = tuple(self._units(message))
            if len(self._kept) >= self._MOST_KEPT:
                self._kept.clear()
            self._kept[message] = units
        return units

    def _units(self, message: bytes) -> Iterator[Unit]:
        path = ""
        try:
            for text in split_outside(_ascii(message), ";") if message.strip() else ():
                header, parameters, path = _header(text.strip(), path)
                command = self._find(header)
                yield _unit(command, parameters)
        except Complaint as complaint:
            yield Unit(None, complaint=complaint.code)

    def _find(self, header: str) -> Command:
        """Find a command by its header; SCPI-1999 volume 1, 6.2.5.2: a suffix left out is 1."""
        bare = _SUFFIX.sub("", header)
        channels = self._commands.get(bare)
        if channels is None:
            too_long = any(len(word) > _LONGEST_MNEMONIC for word in re.split(r"[:?]", header))
            raise Complaint(-112 if too_long else -113)
        channel = 1
        for word, may in zip(header.rstrip("?").split(":"), self._may_have_suffix[bare], strict=True):
            suffix = _SUFFIX.search(word)
            if suffix and not may:
                raise Complaint(-113)
            channel = int(suffix[1]) if suffix else channel
        if channel not in channels:
            raise Complaint(-114)
        return channels[channel]


def _unit(command: Command, parameters: list[str]) -> Unit:
    """Read the parameters; a value out of its limits is an execution error and spares the other units."""
    needs = len(command.takes) if command.needs is None else command.needs
    if len(parameters) > len(command.takes):
        raise Complaint(-108)
    if len(parameters) < needs:
        raise Complaint(-109)
    try:
        values = tuple(read(text) for read, text in zip(command.takes, parameters, strict=False))
    except Complaint as complaint:
        if complaint.is_of_syntax:
            raise
        return Unit(None, complaint=complaint.code)
    return Unit(command.act, values, command.is_query)


def _header(text: str, path: str) -> tuple[str, list[str], str]:
    """Return the whole header in capitals, the parameters, and the path for the next header.

    Source
    ------
    SCPI-1999 volume 1, 6.2.4: a header without a leading colon continues the path of the one before it; a
    common command leaves the path alone.
    """
    match = _HEADER.fullmatch(text)
    if match is None:
        raise Complaint(-102)
    root, header = match[1], match[2].upper()
    parameters = [part.strip() for part in split_outside(match[3], ",")] if match[3] else []
    if not all(parameters):
        raise Complaint(-102)
    if header.startswith("*"):
        if root:
            raise Complaint(-102)
        return header, parameters, path
    whole = header if root or not path else f"{path}:{header}"
    return whole, parameters, whole.rpartition(":")[0]


def split_outside(text: str, separator: str) -> list[str]:
    """Split at a separator that stands neither in quotes nor in parentheses."""
    parts, begin, depth, quote = [], 0, 0, ""
    for place, letter in enumerate(text):
        if quote:
            quote = "" if letter == quote else quote
        elif letter in "\"'":
            quote = letter
        elif letter in "()":
            depth += 1 if letter == "(" else -1
        elif letter == separator and depth == 0:
            parts.append(text[begin:place])
            begin = place + 1
    if quote:
        raise Complaint(-151)
    return [*parts, text[begin:]]


def _ascii(message: bytes) -> str:
    if not message.isascii() or b"\0" in message:
        raise Complaint(-101)
    return message.decode("ascii")
