"""Rotary axes of G-code motion controllers: the driver `gcode-rotary`.

It owns one axis: its sense of rotation, its moves and its zero. Turns are counted and never wrapped. Several
axes of one controller share its link.
"""

from collections.abc import Mapping
from dataclasses import dataclass

from rigctl.errors import FramingError, LinkTimeoutError, MotionError, WrongInstrumentError
from rigctl.interfaces import Begun, Driver, Identity, Option, Options, StageCapabilities
from rigctl.links.link import Link
from rigctl_drivers.gcode_codec import (
    AXES,
    BUILD,
    HOLD,
    HOME,
    RESET,
    Report,
    axis_position,
    format_move,
    parse_build,
)
from rigctl_drivers.gcode_family import GCODE
from rigctl_drivers.gcode_meanings import HALTS
from rigctl_drivers.gcode_wire import GcodeWire

COUNTER_CLOCKWISE = "counter-clockwise to an eye facing the light"
CLOCKWISE = "clockwise to an eye facing the light"
AT_START, NEVER = "at start", "never"

AGAIN_S = 0.01
HOMING_S = (1.0, 180.0)
"""When a search for the zero is first looked at, and when it is given up, s; slow mounts need minutes."""
ARRIVED_STEPS = 1.5
"""A mount has arrived within this many times its resolution: both angles are rounded to it."""
LOOKS_FOR_REST = 20
"""A mount that has not come to rest after so many braking times does not brake."""
REPORTS_FOR_OFFSET = 31
"""The work frame's zero stands in one report of thirty at least; from memory of the firmware's settings."""


@dataclass(slots=True)
class Move:
    """A move under way: where to, and whether the mount was already seen at rest elsewhere."""

    target_deg: float
    was_at_rest: bool = False


class GcodeRotary:
    """One rotary axis on its controller's link."""

    def __init__(self, link: Link, options: Options) -> None:
        self.capabilities = capabilities(options)
        self._link, self._wire = link, GcodeWire(link)
        self._axis: str = options["channel"]
        self._positive: str = options["positive"]
        self._sense = -1.0 if self._positive == CLOCKWISE else 1.0
        self._is_homed_by_run = options["homing"] == AT_START
        self._standing_deg: float | None = None

    def identify(self) -> Identity:
        """Ask who is there; a controller without the axis is the wrong one."""
        lines = self._wire.command(BUILD)
        try:
            identity = parse_build(lines, address=self._link.address)
        except FramingError as error:
            raise self._wrong(f"answers {error.partial[:80]!r} to a question for its build") from error
        report = self._wire.look()
        if axis_position(report.machine or report.work or (), self._axis) is None:
            raise self._wrong(f"has no axis {self._axis}")
        return identity

    def settings(self) -> Mapping[str, str | float]:
        """Read back what the angle depends on."""
        state = self._wire.look().state
        return {"axis": self._axis, "positive": self._positive, "state": state}

    def angle_deg(self) -> float:
        """Read the angle now."""
        for _ in range(REPORTS_FOR_OFFSET):
            angle_deg = self._angle_deg(self._wire.report())
            if angle_deg is not None:
                return angle_deg
        raise MotionError(
            "the controller reports positions in a work frame and never tells where that begins",
            where=self._link.address,
            do="have it report machine positions",
        )

    def is_homed(self) -> bool:
        """Whether the angle can be trusted: no alarm, and its zero found where the rig asks for that."""
        is_alarmed = self._wire.look().state == "Alarm"
        return not is_alarmed and (self._wire.is_homed or not self._is_homed_by_run)

    def begin_move(self, angle_deg: float) -> Begun[float]:
        """Start a move; yields the angle reached, deg.

        Raises
        ------
        MotionError
            The controller is in alarm; the poll raises it too when the mount comes to rest elsewhere.
        RefusedError
            The controller refuses the move, with the meaning of its number.
        """
        from_deg = self.angle_deg() if self._standing_deg is None else self._standing_deg
        self._standing_deg = None
        self._wire.command(format_move(self._axis, self._sense * angle_deg))
        began_s = self._link.timeline.now()  # a slow wire takes a while to carry the command
        takes_s = self.capabilities.travel_time_s(angle_deg - from_deg)
        move = Move(round(angle_deg, 3))
        return Begun(
            due_s=began_s + takes_s,
            poll=lambda: self._arrived(move),
            again_s=AGAIN_S,
            give_up_s=began_s + 3.0 * takes_s + GCODE.longest_s,
        )

    def begin_home(self) -> Begun[float]:
        """Start the search for the mount's own zero; yields the angle afterwards, deg.

        Its acknowledgement comes when the search has ended; until then the link is out of step.
        """
        if not self._is_homed_by_run:
            raise MotionError(
                f"axis {self._axis} lost its place, and the rig file says that it is never homed",
                where=self._link.address,
                do=f"clear the controller's alarm by hand, or give 'homing: {AT_START}' if it has a switch",
            )
        self._standing_deg = None
        began_s = self._link.timeline.now()
        self._link.write(HOME)
        self._link.mark_out_of_step()
        first_s, last_s = HOMING_S
        return Begun(due_s=began_s + first_s, poll=self._homed, again_s=first_s / 2, give_up_s=began_s + last_s)

    def stop(self) -> None:
        """Stop turning now and forget the moves that are queued; returns once the mount is at rest.

        The hold acts even while the link is out of step. A controller that does not answer it, as some do
        while they search their zero, is reset, which loses the mount's place.
        """
        self._standing_deg = None
        self._link.interrupt(HOLD)
        try:
            report = self._at_rest()
        except LinkTimeoutError:
            self._wire.is_homed = False
            self._link.interrupt(RESET)
            self._link.mark_out_of_step()
            report = self._wire.look()
        if report.state == "Hold" and not report.is_moving:
            self._wire.reset()

    def _at_rest(self) -> Report:
        """Look until the mount is at rest; between looks it is given the time it needs to brake."""
        able, timeline = self.capabilities, self._link.timeline
        for _ in range(LOOKS_FOR_REST):
            report = self._wire.look()
            if not report.is_moving:
                return report
            timeline.wait_until(timeline.now() + able.speed_deg_per_s / able.acceleration_deg_per_s2)
        raise self._stuck("it does not stop", "cut the power of its motors")

    def _arrived(self, move: Move) -> float | None:
        """Return the angle reached, or None on the way.

        Right after a move was queued a report may still show the mount at rest where it was, so only a second
        report of it at rest elsewhere is believed.
        """
        report = self._wire.report()
        if report.state in HALTS:
            halt = HALTS[report.state]
            raise self._stuck(f"{halt.what} on the way to {move.target_deg:.3f} deg", halt.do)
        angle_deg = self._angle_deg(report)
        if report.is_moving or angle_deg is None:
            return None
        if abs(angle_deg - move.target_deg) <= ARRIVED_STEPS * self.capabilities.resolution_deg:
            self._standing_deg = angle_deg
            return angle_deg
        if not move.was_at_rest:
            move.was_at_rest = True
            return None
        raise self._stuck(
            f"it stands at {angle_deg:.3f} deg instead of {move.target_deg:.3f} deg",
            "see what blocks the mount or whether it lost its place; home it and resume",
        )

    def _homed(self) -> float | None:
        """Return the angle once the search has ended, or None while it goes on."""
        try:
            complaints = self._link.resync().complaints
        except LinkTimeoutError:
            return None
        self._wire.raise_for(complaints)
        report = self._wire.report()
        if report.is_moving:
            return None
        self._wire.is_homed = True
        self._standing_deg = self._angle_deg(report)
        return self._standing_deg

    def _angle_deg(self, report: Report) -> float | None:
        """Return the axis in the bench's sense; None until the work frame's zero has been told."""
        values = self._wire.machine_position(report)
        position_deg = None if values is None else axis_position(values, self._axis)
        return None if position_deg is None else self._sense * position_deg + 0.0

    def _stuck(self, what: str, do: str) -> MotionError:
        return MotionError(f"axis {self._axis}: {what}", where=self._link.address, do=do)

    def _wrong(self, what: str) -> WrongInstrumentError:
        do = "check the address, the driver and the channel of this mount in the rig file"
        return WrongInstrumentError(f"the controller {what}", where=self._link.address, do=do)


def capabilities(options: Options) -> StageCapabilities:
    """Return what the mount can do, as the rig file describes it."""
    return StageCapabilities(
        travel_deg=tuple(options["travel"]),
        speed_deg_per_s=options["speed"],
        acceleration_deg_per_s2=options["acceleration"],
        backlash_deg=options["backlash"],
        resolution_deg=options["resolution"],
    )


DRIVER = Driver(
    name="gcode-rotary",
    kind="rotation stage",
    family=GCODE,
    options={
        "channel": Option("choice", default="A", choices=tuple(AXES), meaning="letter of the axis"),
        "positive": Option(
            "choice",
            default=COUNTER_CLOCKWISE,
            choices=(COUNTER_CLOCKWISE, CLOCKWISE),
            meaning="how the mount turns when its numbers grow",
        ),
        "travel": Option("span of angle", default=(-3600.0, 3600.0), meaning="angles that may be asked for"),
        "speed": Option("angular speed", default=20.0, meaning="speed of a move"),
        "acceleration": Option("angular acceleration", default=100.0, meaning="gain of speed in a move"),
        "backlash": Option(
            "angle", default=0.1, meaning="play of the gear between the two senses", sign="not negative"
        ),
        "resolution": Option("angle", default=0.001, meaning="smallest step of the mount", sign="positive"),
        "homing": Option(
            "choice",
            default=NEVER,
            choices=(AT_START, NEVER),
            meaning="whether a run searches the mount's zero before it measures",
        ),
    },
    capabilities=capabilities,
    open=GcodeRotary,
    meaning="rotary axis of a G-code motion controller",
)
