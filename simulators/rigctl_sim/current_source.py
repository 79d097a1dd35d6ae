"""A simulated current source with a diode on it: what its commands set, and what then flows.

It owns limits, protection, interlock and output. What flows is a function of time that others may read.
"""

import math
from collections.abc import Iterable
from dataclasses import dataclass

from rigctl_sim.diode import Load
from rigctl_sim.scpi.complaint import Complaint
from rigctl_sim.scpi.parameters import boolean, number
from rigctl_sim.scpi.response import nr3
from rigctl_sim.scpi.status import Status
from rigctl_sim.scpi.syntax import Command
from rigctl_sim.trajectory import Trajectory

VOLTAGE_QUESTIONABLE, CURRENT_QUESTIONABLE = 1 << 0, 1 << 1
"""Bits of the questionable register: SCPI-1999 volume 1, 9.4."""
INTERLOCK_OPEN = 1 << 9
"""The standard leaves bits 9 to 12 to the designer; wide-spread convention."""
REACHED_IN_S = 1e-3
"""A setpoint is reached without overshoot in about so long; common practice."""


@dataclass(frozen=True, slots=True)
class SourceMake:
    """How a source is built: its largest current and compliance, and the step of its setpoint."""

    current_a: float
    compliance_v: float
    resolution_a: float


class SimulatedCurrentSource:
    """A current source behind an SCPI wire.

    Parameters
    ----------
    load
        What it drives.
    current
        What flows, A; it writes there.
    channel
        The numeric suffix of its commands.
    interlock_opens_at_s
        Instant at which somebody opens the interlock, for good.
    """

    def __init__(
        self,
        make: SourceMake,
        load: Load,
        current: Trajectory,
        *,
        channel: int = 1,
        status: Status | None = None,
        interlock_opens_at_s: float = math.inf,
    ) -> None:
        self.status = status or Status()
        self._make, self._load, self._current, self._channel = make, load, current, channel
        self._opens_at_s = interlock_opens_at_s
        self._limit_a, self._compliance_v = make.current_a, make.compliance_v
        self._level_a = 0.0
        self._is_on = self._is_tripped = False

    def commands(self) -> Iterable[Command]:
        """Return its commands: SCPI-1999 volume 2, chapters 13, 15, 19 and 20."""
        amps = number("A", 0.0, self._make.current_a, default=0.0)
        volts = number("V", 0.0, self._make.compliance_v, default=self._make.compliance_v)
        source, channel = "[SOURce#]", self._channel
        return (
            Command(f"{source}:CURRent[:LEVel][:IMMediate][:AMPLitude]", self._set_level, (amps,), channel=channel),
            Command(
                f"{source}:CURRent[:LEVel][:IMMediate][:AMPLitude]?",
                lambda _: nr3(self._level_a),
                channel=channel,
            ),
            Command(f"{source}:CURRent:LIMit[:AMPLitude]", self._set_limit, (amps,), channel=channel),
            Command(f"{source}:CURRent:LIMit[:AMPLitude]?", lambda _: nr3(self._limit_a), channel=channel),
            Command(f"{source}:VOLTage:PROTection[:LEVel]", self._set_compliance, (volts,), channel=channel),
            Command(f"{source}:VOLTage:PROTection[:LEVel]?", lambda _: nr3(self._compliance_v), channel=channel),
            Command("OUTPut#[:STATe]", self._switch, (boolean,), channel=channel),
            Command("OUTPut#[:STATe]?", lambda _: f"{self._is_on:d}", channel=channel),
            Command("OUTPut#:PROTection:TRIPped?", lambda _: f"{self._is_tripped:d}", channel=channel),
            Command("OUTPut#:PROTection:CLEar", lambda _: self._clear_trip(), channel=channel),
            Command("MEASure#[:SCALar]:CURRent[:DC]?", lambda at_s: nr3(self._current(at_s)), channel=channel),
            Command("MEASure#[:SCALar]:VOLTage[:DC]?", self._measured_voltage, channel=channel),
        )

    def catch_up(self, now_s: float) -> None:
        """Notice an interlock that has opened: the output stays off from then on."""
        is_open = now_s >= self._opens_at_s
        if is_open:
            self._is_on = False
        self._tell(INTERLOCK_OPEN, is_open)

    def busy_until_s(self) -> float:
        """Return an instant that is past: nothing takes time here."""
        return 0.0

    def reset(self, now_s: float) -> None:
        """Switch the output off and go back to the settings after power-on."""
        self._is_on = False
        self._level_a = 0.0
        self._limit_a, self._compliance_v = self._make.current_a, self._make.compliance_v
        self._clear_trip()
        self._drive(now_s)

    def _set_level(self, at_s: float, level_a: float) -> None:
        """Set the current; one beyond the limit is refused, as the standard asks of a value out of range."""
        if level_a > self._limit_a * (1 + 1e-12):
            raise Complaint(-222)
        step_a = self._make.resolution_a
        self._level_a = round(level_a / step_a) * step_a
        self._drive(at_s)

    def _set_limit(self, at_s: float, limit_a: float) -> None:
        """Set the limit; a current beyond it comes down to it."""
        self._limit_a = limit_a
        self._level_a = min(self._level_a, limit_a)
        self._drive(at_s)

    def _set_compliance(self, at_s: float, compliance_v: float) -> None:
        self._compliance_v = compliance_v
        self._drive(at_s)

    def _switch(self, at_s: float, is_on: bool) -> None:
        if is_on and (self._is_tripped or at_s >= self._opens_at_s):
            raise Complaint(-221)
        self._is_on = is_on
        self._drive(at_s)

    def _drive(self, at_s: float) -> None:
        """Let flow what is set; what asks for more voltage than allowed trips the protection."""
        if self._is_on and self._load.voltage_at(self._level_a) > self._compliance_v:
            self._is_on, self._is_tripped = False, True
            self._tell(VOLTAGE_QUESTIONABLE, True)
        flowing_a = self._level_a if self._is_on else 0.0
        self._tell(CURRENT_QUESTIONABLE, self._is_on and self._level_a >= self._limit_a)
        will_be_cut = self._opens_at_s < math.inf
        if will_be_cut or flowing_a != self._current.rests_at:
            self._current.glide(at_s, flowing_a, REACHED_IN_S)
        if will_be_cut:
            self._current.glide(max(self._opens_at_s, at_s), 0.0, REACHED_IN_S)

    def _clear_trip(self) -> None:
        self._is_tripped = False
        self._tell(VOLTAGE_QUESTIONABLE, False)

    def _measured_voltage(self, at_s: float) -> str:
        return nr3(self._load.voltage_at(self._current(at_s)))

    def _tell(self, bit: int, is_set: bool) -> None:
        self.status.questionable.set_bit(bit, is_set, channel=self._channel)
