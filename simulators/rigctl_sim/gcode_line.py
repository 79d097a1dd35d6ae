"""One line of G-code taken apart: words to a block, or the number of the error.

It owns the words (ISO 6983, RS-274) and the error numbers of one-line status firmware; it moves nothing.
"""

import re
from collections.abc import Collection
from dataclasses import dataclass, field

EXPECTED_LETTER, BAD_NUMBER, INVALID_STATEMENT = 1, 2, 3
NOT_IDLE, LOCKED, OVERFLOW = 8, 9, 11
UNSUPPORTED, NO_FEED_RATE, TWO_OF_A_GROUP, REPEATED = 20, 22, 21, 25
MISSING_VALUE, UNUSED_WORDS, NO_SUCH_SETTING = 28, 36, 53

_COMMENT = re.compile(r"\([^)]*\)|;.*")
_WORD = re.compile(r"([A-Z])([+-]?(?:\d+\.?\d*|\.\d+))?")
_MOTION, _DISTANCE = {0.0: "rapid", 1.0: "feed"}, {90.0: "absolute", 91.0: "relative"}
# what a machine of this kind answers with ok and which changes nothing on a bench that only turns
_WITHOUT_EFFECT = frozenset({17.0, 21.0, 40.0, 49.0, 54.0, 80.0, 94.0})


class LineError(Exception):
    """A line cannot be executed; `number` stands in the answer `error:number`."""

    def __init__(self, number: int) -> None:
        self.number = number
        super().__init__(f"error:{number}")


@dataclass(frozen=True, slots=True)
class Block:
    """What one line asks for; what it does not name is None."""

    motion: str | None = None
    distance: str | None = None
    is_machine_frame: bool = False
    feed: float | None = None
    pause_s: float | None = None
    axes: dict[str, float] = field(default_factory=dict)


@dataclass(slots=True)
class Modes:
    """What earlier lines leave behind for later ones, as after a reset; feed in deg/min."""

    motion: str = "rapid"
    distance: str = "absolute"
    feed: float = 0.0

    def follow(self, block: Block) -> None:
        """Take over what a line sets."""
        self.motion = block.motion or self.motion
        self.distance = block.distance or self.distance
        self.feed = block.feed or self.feed
        if self.motion == "feed" and block.axes and not self.feed:
            raise LineError(NO_FEED_RATE)

    def __str__(self) -> str:
        motion = "G0" if self.motion == "rapid" else "G1"
        distance = "G90" if self.distance == "absolute" else "G91"
        return f"{motion} G54 G17 G21 {distance} G94 M5 M9 T0 F{self.feed:g} S0"


def parse_line(line: str, axes: Collection[str]) -> Block:
    """Take a line apart.

    Parameters
    ----------
    line
        Without its terminator; letters of any case.
    axes
        Letters of the axes that the machine has.
    """
    commands: list[float] = []
    values: dict[str, float] = {}
    for letter, number in _words(_COMMENT.sub("", line).replace(" ", "").replace("\t", "").upper()):
        if letter == "G":
            commands.append(number)
        elif letter not in axes and letter not in "FPN":
            raise LineError(UNSUPPORTED)
        elif letter in values:
            raise LineError(REPEATED)
        else:
            values[letter] = number
    values.pop("N", None)
    return _block(commands, values)


def _words(text: str) -> list[tuple[str, float]]:
    words, place = [], 0
    while place < len(text):
        match = _WORD.match(text, place)
        if match is None:
            raise LineError(EXPECTED_LETTER)
        if match[2] is None:
            raise LineError(BAD_NUMBER)
        words.append((match[1], float(match[2])))
        place = match.end()
    return words


def _block(commands: list[float], values: dict[str, float]) -> Block:
    feed, pause_s = values.pop("F", None), values.pop("P", None)
    known = {*_MOTION, *_DISTANCE, *_WITHOUT_EFFECT, 4.0, 53.0}
    if not known.issuperset(commands):
        raise LineError(UNSUPPORTED)
    if (pause_s is None) == (4.0 in commands):
        raise LineError(MISSING_VALUE if pause_s is None else UNUSED_WORDS)
    if pause_s is not None and (values or pause_s < 0.0):
        raise LineError(UNUSED_WORDS if values else BAD_NUMBER)
    return Block(
        motion=_one_of(_MOTION, commands),
        distance=_one_of(_DISTANCE, commands),
        is_machine_frame=53.0 in commands,
        feed=feed,
        pause_s=pause_s,
        axes=values,
    )


def _one_of(group: dict[float, str], commands: list[float]) -> str | None:
    found = [group[command] for command in commands if command in group]
    if len(found) > 1:
        raise LineError(TWO_OF_A_GROUP)
    return found[0] if found else None
