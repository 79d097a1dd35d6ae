"""A twin that follows a script to the byte, and a link to it in virtual time."""

from collections import deque
from dataclasses import dataclass
from datetime import UTC, datetime

from rigctl.interfaces import Option, Options
from rigctl.links.family import Family
from rigctl.links.link import Link
from rigctl.links.loopback import LoopbackChannel
from rigctl.timeline import VirtualTimeline

ADDRESS = "tcp://bench:5025"


@dataclass(frozen=True, slots=True)
class Line:
    """Bytes that must come next, and what is answered to them."""

    expected: bytes
    answer: bytes
    after_s: float
    drips_s: float


class ScriptedTwin:
    """Expects exactly the bytes of its script, in order."""

    def __init__(self) -> None:
        self._script: deque[Line] = deque()
        self._arrived = b""
        self._answers: deque[tuple[float, bytes]] = deque()
        self.heard: list[bytes] = []

    def expect(self, expected: bytes, answer: bytes = b"", *, after_s: float = 0.0, drips_s: float = 0.0) -> None:
        """Add a line to the script; with `drips_s` the answer comes byte by byte, so far apart."""
        self._script.append(Line(expected, answer, after_s, drips_s))

    def say(self, data: bytes, at_s: float = 0.0) -> None:
        """Say something unasked."""
        self._answers.append((at_s, data))

    def receive(self, data: bytes, now_s: float) -> None:
        self._arrived += data
        while self._arrived:
            assert self._script, f"nothing was expected any more, but {self._arrived!r} came"
            line = self._script[0]
            assert line.expected.startswith(self._arrived[: len(line.expected)]), (
                f"expected {line.expected!r}, but {self._arrived!r} came"
            )
            if len(self._arrived) < len(line.expected):
                return
            self._arrived = self._arrived[len(line.expected) :]
            self.heard.append(self._script.popleft().expected)
            self._answer(line, now_s + line.after_s)

    def next_ready_s(self) -> float | None:
        return self._answers[0][0] if self._answers else None

    def take(self, now_s: float) -> bytes:
        ready = b""
        while self._answers and self._answers[0][0] <= now_s:
            ready += self._answers.popleft()[1]
        return ready

    def assert_done(self) -> None:
        assert [line.expected for line in self._script] == []
        assert self._arrived == b""

    def _answer(self, line: Line, at_s: float) -> None:
        if not line.drips_s:
            if line.answer:
                self._answers.append((at_s, line.answer))
            return
        for place in range(len(line.answer)):
            self._answers.append((at_s + place * line.drips_s, line.answer[place : place + 1]))


@dataclass(frozen=True, slots=True)
class Bench:
    """A scripted twin, the link to it and the time both live in."""

    twin: ScriptedTwin
    link: Link
    timeline: VirtualTimeline


def make_bench(family: Family, *, is_in_step: bool = True) -> Bench:
    """Open a link to a twin without a script; its first resync is left out unless asked for."""
    twin, timeline = ScriptedTwin(), VirtualTimeline(datetime(2026, 1, 2, tzinfo=UTC))
    link = Link(ADDRESS, lambda: LoopbackChannel(ADDRESS, twin, timeline), family, timeline)
    link.open()
    link.is_in_step = is_in_step
    return Bench(twin, link, timeline)


def with_defaults(options: dict[str, Option], **given: object) -> Options:
    """Return a driver's options as the rig file's loader would; `_` in a name stands for a space."""
    values = {name: option.default for name, option in options.items()}
    values.update({name.replace("_", " "): value for name, value in given.items()})
    assert values.keys() == options.keys()
    return values
