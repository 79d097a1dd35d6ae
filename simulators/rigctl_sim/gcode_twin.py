"""A mount behind one-line motion firmware, as a function of time.

It owns the stream: real-time bytes picked out of it, lines in order with one acknowledgement each, errors
that stick, alarms, homing and reset. `ok` means parsed and planned, not done; `G4` is acknowledged when all
motion is done.

Source: the open documentation of this kind of firmware and a firmware simulator, as the notes on instrument
input and output keep them; ISO 6983 defines the words only.
"""

import math
from collections import deque
from collections.abc import Callable
from dataclasses import dataclass

from rigctl_sim.gcode_line import (
    INVALID_STATEMENT,
    LOCKED,
    NO_SUCH_SETTING,
    NOT_IDLE,
    OVERFLOW,
    Block,
    LineError,
    Modes,
    parse_line,
)
from rigctl_sim.gcode_report import LONGEST_LINE, Reports, build_lines, setting_lines
from rigctl_sim.machine import Machine

ANSWERS_IN_S = 0.002
"""How long an answer takes; common practice for boards on a network or USB."""
SOFT_LIMIT, LOST_PLACE, HOMING_RESET = 2, 3, 6
"""Alarms."""
_RESET, _STATUS, _HOLD, _RESUME = 0x18, 0x3F, 0x21, 0x7E


@dataclass(frozen=True, slots=True)
class Pending:
    """The line under way: when it can go on (never is infinity), and how."""

    ready_s: Callable[[], float]
    go_on: Callable[[float], None]


class GcodeTwin:
    """The far end of a wire with a machine behind it.

    Parameters
    ----------
    name
        What it calls itself in `$I`.
    """

    def __init__(self, machine: Machine, *, name: str) -> None:
        self._machine, self._name = machine, name
        self._lines: deque[tuple[float, str]] = deque()
        self._answers: deque[tuple[float, bytes]] = deque()
        self._arriving = bytearray()
        self._pending: Pending | None = None
        self._free_from_s = 0.0
        self._is_locked = self._is_homing = self._had_return = False
        self._reports, self._modes, self._sticky = Reports(), Modes(), 0

    def receive(self, data: bytes, now_s: float) -> None:
        """Take bytes in: real-time bytes act at once, lines in their turn."""
        self._advance(now_s)
        for byte in data:
            if byte in _REAL_TIME:
                _REAL_TIME[byte](self, now_s)
            elif byte in b"\r\n":
                self._end_line(byte, now_s)
            elif byte < 0x80 and len(self._arriving) <= LONGEST_LINE:
                self._arriving.append(byte)

    def next_ready_s(self) -> float | None:
        """Return the instant of the next answer, or at which the line under way goes on."""
        if self._answers:
            return self._answers[0][0]
        ready_s = math.inf if self._pending is None else self._pending.ready_s()
        return None if math.isinf(ready_s) else ready_s + ANSWERS_IN_S

    def take(self, now_s: float) -> bytes:
        """Return what has been answered by now."""
        self._advance(now_s)
        ready = []
        while self._answers and self._answers[0][0] <= now_s:
            ready.append(self._answers.popleft()[1])
        return b"".join(ready)

    def _end_line(self, byte: int, now_s: float) -> None:
        # CR LF is one end, not two
        if not (byte == 0x0A and self._had_return and not self._arriving):
            line = self._arriving.decode("ascii")
            self._lines.append((now_s, line))
        self._arriving.clear()
        self._had_return = byte == 0x0D
        self._advance(now_s)

    def _advance(self, now_s: float) -> None:
        """Work off lines up to now, each at its own instant."""
        while self._lines:
            at_s = max(self._lines[0][0], self._free_from_s)
            if self._pending is not None:
                at_s = max(at_s, self._pending.ready_s())
            if at_s > now_s:
                return
            self._free_from_s = at_s
            pending, self._pending = self._pending, None
            if pending is None:
                self._begin_line(self._lines[0][1].strip(), at_s)
            else:
                pending.go_on(at_s)
            if self._pending is None:
                self._lines.popleft()

    def _begin_line(self, line: str, at_s: float) -> None:
        try:
            if len(line) > LONGEST_LINE:
                raise LineError(OVERFLOW)
            if line.startswith("$"):
                self._sticky = 0
                self._system(line.upper(), at_s)
            elif not line:
                self._sticky = 0
                self._ok(at_s)
            else:
                self._motion_line(line, at_s)
        except LineError as error:
            self._answer(f"error:{error.number}", at_s)

    def _motion_line(self, line: str, at_s: float) -> None:
        """Execute a line of G-code; an error sticks until an empty line or a `$` command."""
        if self._sticky:
            raise LineError(self._sticky)
        try:
            if self._is_locked:
                raise LineError(LOCKED)
            self._execute(parse_line(line, self._machine.axes), at_s)
        except LineError as error:
            self._sticky = error.number
            raise

    def _execute(self, block: Block, at_s: float) -> None:
        if block.pause_s is not None:
            self._wait_for_motion(block.pause_s, at_s)
            return
        self._modes.follow(block)
        if not block.axes:
            self._ok(at_s)
        elif self._machine.room_from_s(at_s) > at_s:
            self._pending = Pending(lambda: self._machine.room_from_s(-math.inf), lambda s: self._plan(block, s))
        else:
            self._plan(block, at_s)

    def _plan(self, block: Block, at_s: float) -> None:
        is_relative = self._modes.distance == "relative" and not block.is_machine_frame
        targets = {
            letter: value + (self._machine.target_deg(letter) if is_relative else 0.0)
            for letter, value in block.axes.items()
        }
        if not self._machine.is_within_travel(targets):
            self._machine.hold(at_s)
            self._raise_alarm(SOFT_LIMIT, at_s)
            self._sticky = LOCKED
            self._answer(f"error:{LOCKED}", at_s)
            return
        speed = math.inf if self._modes.motion == "rapid" else self._modes.feed / 60.0
        self._machine.plan(at_s, targets, speed)
        self._ok(at_s)

    def _wait_for_motion(self, pause_s: float, at_s: float) -> None:
        machine = self._machine
        self._pending = Pending(lambda: max(machine.done_from_s(), at_s) + pause_s, self._ok)

    def _system(self, line: str, at_s: float) -> None:
        if line == "$G":
            self._answer(f"[GC:{self._modes}]", at_s)
        elif line == "$X":
            self._unlock(at_s)
        elif self._state(at_s) not in ("Idle", "Alarm"):
            raise LineError(NOT_IDLE)
        elif line == "$H":
            self._home(at_s)
            return
        elif line in ("$I", "$$"):
            for text in build_lines(self._name) if line == "$I" else setting_lines(self._machine):
                self._answer(text, at_s)
        else:
            raise LineError(NO_SUCH_SETTING if "=" in line else INVALID_STATEMENT)
        self._ok(at_s)

    def _home(self, at_s: float) -> None:
        self._refuse_while_turning(at_s)
        self._machine.abandon(at_s)
        ends_s = self._machine.home(at_s)
        self._is_homing, self._is_locked = True, False
        self._pending = Pending(lambda: ends_s, self._homed)

    def _homed(self, at_s: float) -> None:
        self._is_homing = False
        self._ok(at_s)

    def _unlock(self, at_s: float) -> None:
        self._refuse_while_turning(at_s)
        if self._is_locked:
            self._is_locked = False
            self._machine.abandon(at_s)
            self._answer("[MSG:Caution: Unlocked]", at_s)

    def _refuse_while_turning(self, at_s: float) -> None:
        if self._machine.is_turning(at_s):
            raise LineError(NOT_IDLE)

    def _reset(self, now_s: float) -> None:
        """Forget all lines and moves; a reset while something turns loses the place."""
        was_homing = self._is_homing
        self._lines.clear()
        self._arriving.clear()
        self._pending, self._is_homing = None, False
        if self._machine.abandon(now_s) or was_homing:
            self._raise_alarm(HOMING_RESET if was_homing else LOST_PLACE, now_s)
        self._modes, self._sticky = Modes(), 0
        self._answer("\r\nsimulated-mount 1.1 ['$' for help]", now_s)
        if self._is_locked:
            self._answer("[MSG:'$H'|'$X' to unlock]", now_s)

    def _raise_alarm(self, number: int, at_s: float) -> None:
        self._is_locked = True
        self._answer(f"ALARM:{number}", at_s)

    def _hold(self, now_s: float) -> None:
        if not self._is_homing and not self._is_locked:
            self._machine.hold(now_s)

    def _resume(self, now_s: float) -> None:
        if not self._is_locked:
            self._machine.resume(now_s)

    def _state(self, now_s: float) -> str:
        is_turning = self._machine.is_turning(now_s)
        if self._is_locked:
            return "Alarm"
        if self._is_homing:
            return "Home"
        if self._machine.is_held:
            return "Hold:1" if is_turning else "Hold:0"
        return "Run" if is_turning else "Idle"

    def _report(self, now_s: float) -> None:
        self._answer(self._reports.next(self._machine, self._state(now_s), now_s), now_s)

    def _ok(self, at_s: float) -> None:
        self._answer("ok", at_s)

    def _answer(self, line: str, at_s: float) -> None:
        self._answers.append((at_s + ANSWERS_IN_S, line.encode("ascii") + b"\r\n"))


_REAL_TIME: dict[int, Callable[[GcodeTwin, float], None]] = {
    _RESET: GcodeTwin._reset,
    _STATUS: GcodeTwin._report,
    _HOLD: GcodeTwin._hold,
    _RESUME: GcodeTwin._resume,
}
