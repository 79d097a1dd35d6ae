"""Exchanges with a G-code controller: a line and its acknowledgement, a report, a reset.

It owns what the controller says of itself beside the answers: alarms, and where its work frame begins. It
knows no axis, repeats nothing and never waits.
"""

from collections.abc import Callable

from rigctl.errors import LinkTimeoutError, MotionError, RefusedError
from rigctl.links.link import Link
from rigctl_drivers.gcode_codec import (
    CLEAR,
    REPORT,
    RESET,
    Ack,
    Alarm,
    Report,
    is_ack_line,
    is_greeting_line,
    is_report_line,
    last_alarm,
    parse_line,
    parse_report,
)
from rigctl_drivers.gcode_family import STALE_ALARM
from rigctl_drivers.gcode_meanings import ERROR_LOCKED, ERROR_NOT_IDLE, alarm_words, error_words
from rigctl_drivers.reading import reading


class GcodeWire:
    """The controller behind one link, as one of its axes sees it."""

    def __init__(self, link: Link) -> None:
        self.is_homed = False
        self._link = link
        self._alarm: int | None = None
        self._offset: tuple[float, ...] | None = None

    def command(self, line: bytes) -> tuple[bytes, ...]:
        """Send one line and return what came before its acknowledgement.

        Raises
        ------
        MotionError
            The controller is in alarm.
        RefusedError
            The line is refused; what refuses every further line was cleared.
        """
        *before, last = self._exchange(line, is_ack_line)
        with reading(self._link) as address:
            answer = parse_line(last, address=address)
        if isinstance(answer, Alarm):
            self._alarm, self.is_homed = answer.code, False
            self._link.mark_out_of_step()
            raise self._alarmed()
        if isinstance(answer, Ack) and answer.error is not None:
            self._exchange(CLEAR, is_ack_line)
            raise self._refused(line, answer.error)
        return tuple(line for line in before if not is_report_line(line))

    def look(self) -> Report:
        """Ask for a report, whatever it says."""
        *_, last = self._exchange(REPORT, is_report_line)
        with reading(self._link) as address:
            report = parse_report(last, address=address)
        if report.state == "Alarm":
            self._alarm = self._alarm if report.alarm is None else report.alarm
            self.is_homed = False
        else:
            self._alarm = None
        self._offset = self._offset if report.offset is None else report.offset
        return report

    def report(self) -> Report:
        """Ask for a report; raises `MotionError` when it tells of an alarm."""
        report = self.look()
        if report.state == "Alarm":
            raise self._alarmed()
        return report

    def reset(self) -> None:
        """Reset a controller that is at rest: it keeps its position and forgets the moves that are queued."""
        self._exchange(RESET, is_greeting_line)

    def machine_position(self, report: Report) -> tuple[float, ...] | None:
        """Return positions in the machine's frame; None until a report told where the work frame begins."""
        if report.machine is not None or report.work is None:
            return report.machine
        if self._offset is None or len(self._offset) != len(report.work):
            return None
        return tuple(work + zero for work, zero in zip(report.work, self._offset, strict=True))

    def raise_for(self, complaints: tuple[tuple[int, str], ...]) -> None:
        """Raise the first of the complaints that a resync came upon."""
        for code, text in complaints:
            if text.startswith(STALE_ALARM):
                self._alarm, self.is_homed = code, False
                raise self._alarmed()
            raise self._refused(b"", code)

    def _exchange(self, data: bytes, is_last: Callable[[bytes], bool]) -> tuple[bytes, ...]:
        """Exchange, and keep an alarm that is told on the way or was told unasked before."""
        try:
            lines = self._link.exchange(data, is_last=is_last)
        except RefusedError as error:
            self.raise_for(((error.code, error.text),))
            raise
        except LinkTimeoutError as late:
            self._note_alarm(late.partial + b"\n" + self._link.take_discarded())
            if self._alarm is None:
                raise
            raise self._alarmed() from late
        self._note_alarm(b"\n".join((self._link.take_discarded(), *lines[:-1])))
        return lines

    def _note_alarm(self, lines: bytes) -> None:
        alarm = last_alarm(lines)
        if alarm is not None:
            self._alarm, self.is_homed = alarm, False

    def _refused(self, line: bytes, error: int) -> RefusedError | MotionError:
        """Make the error for a refusal; what is locked is locked by an alarm more often than not."""
        if error in (ERROR_LOCKED, ERROR_NOT_IDLE) and self.look().state == "Alarm":
            return self._alarmed()
        return RefusedError(
            f"the controller refused {line.decode().strip()!r}: error {error}, {error_words(error)}",
            address=self._link.address,
            code=error,
            text=error_words(error),
            do="compare the mount's options in the rig file with the controller's settings",
        )

    def _alarmed(self) -> MotionError:
        return MotionError(
            f"the controller is in {alarm_words(self._alarm)}",
            where=self._link.address,
            do="see that the mount is free, reset the controller, then home the mount",
        )
