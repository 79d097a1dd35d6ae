"""Current sources for laser diodes that speak SCPI: the driver `scpi-current-source`.

It owns the wire commands of a source and the words for what keeps its output off.

Source of the commands: SCPI-1999 volume 2 (SOURce:CURRent, SOURce:VOLTage:PROTection, OUTPut, STATus), from memory;
the bit of the interlock is widespread convention.
"""

import math
from collections.abc import Mapping

from rigctl.errors import InstrumentError
from rigctl.interfaces import Driver, Identity, Option, Options, SourceCapabilities, SourceConditions
from rigctl.links.link import Link
from rigctl_drivers.output import Output
from rigctl_drivers.reading import reading
from rigctl_drivers.scpi_codec import parse_bool, parse_number, parse_reading, parse_register
from rigctl_drivers.scpi_family import SCPI
from rigctl_drivers.scpi_shell import QUESTIONABLE, ask, identify, look, refused, set_number

AT_COMPLIANCE = 1 << 0
INTERLOCK_OPEN = 1 << 9
"""Bits of the questionable register. Source: SCPI-1999 volume 1, 9.4, for the voltage; the interlock is convention."""


class ScpiCurrentSource:
    """One channel of a source on its link."""

    def __init__(self, link: Link, options: Options) -> None:
        self.capabilities = capabilities(options)
        self._link = link
        channel = options["channel"]
        self._level = f"SOURCE{channel}:CURRENT:LEVEL:IMMEDIATE:AMPLITUDE"
        self._limit = f"SOURCE{channel}:CURRENT:LIMIT:AMPLITUDE"
        self._compliance = f"SOURCE{channel}:VOLTAGE:PROTECTION:LEVEL"
        self._output = Output(link, channel, why_off=self._why_off)
        self._conditions = (
            f"MEASURE{channel}:CURRENT?",
            f"MEASURE{channel}:VOLTAGE?",
            self._output.query,
            QUESTIONABLE,
            f"OUTPUT{channel}:PROTECTION:TRIPPED?",
        )

    def identify(self) -> Identity:
        """Ask who is there."""
        return identify(self._link, kind="current source", probe=f"{self._limit}?")

    def settings(self) -> Mapping[str, str | float]:
        """Read back setpoint, limits and output."""
        numbers = (f"{name}?" for name in (self._level, self._limit, self._compliance))
        level, limit, compliance, output = ask(self._link, *numbers, self._output.query)
        with reading(self._link) as at:
            return {
                "setpoint_a": parse_number(level, address=at),
                "limit_a": parse_number(limit, address=at),
                "compliance_v": parse_number(compliance, address=at),
                "output": "on" if self._output.is_on(output) else "off",
            }

    def set_limit(self, current_a: float) -> float:
        """Program the instrument's own current limit and return it as read back, A."""
        return set_number(self._link, self._limit, current_a, step=self.capabilities.resolution_a)

    def set_compliance(self, voltage_v: float) -> float:
        """Program the compliance voltage and return it as read back, V."""
        return set_number(self._link, self._compliance, voltage_v)

    def set_current(self, current_a: float) -> float:
        """Set the current and return the setpoint as read back, A."""
        return set_number(self._link, self._level, current_a, step=self.capabilities.resolution_a)

    def set_output(self, is_on: bool) -> bool:
        """Switch the output and return its state as read back.

        Off is sent at once, whatever became of earlier exchanges, and is confirmed whatever else the instrument
        complains of.

        Raises
        ------
        InstrumentError
            The output does not go on, and why; or it does not go off.
        RefusedError, LinkError
            Its state cannot be read back.
        """
        return self._output.switch_on() if is_on else self._output.switch_off()

    def conditions(self) -> SourceConditions:
        """Read everything that tells how the diode is doing, in one exchange.

        Raises
        ------
        InstrumentError
            The output is on, and its current or voltage cannot be measured.
        RefusedError
            The instrument complains of something that neither a trip nor the interlock explains.
        """
        reply = look(self._link, *self._conditions)
        current, voltage, output, status, tripped = reply.values
        with reading(self._link) as at:
            bits = parse_register(status, address=at)
            seen = SourceConditions(
                current_a=parse_reading(current, address=at),
                voltage_v=parse_reading(voltage, address=at),
                is_on=self._output.is_on(output),
                is_interlock_open=bool(bits & INTERLOCK_OPEN),
                is_at_compliance=bool(bits & AT_COMPLIANCE),
                is_tripped=parse_bool(tripped, address=at),
            )
        if reply.complaint.code and not (seen.is_tripped or seen.is_interlock_open):
            raise refused(self._link, *self._conditions, complaint=reply.complaint)
        if seen.is_on and not math.isfinite(seen.current_a + seen.voltage_v):
            raise self._trouble(
                f"the output is on, but the source cannot measure it: current {current}, voltage {voltage}",
                do="look at the leads to the diode, and at the source's ranges",
            )
        return seen

    def _why_off(self) -> InstrumentError | None:
        """Ask the instrument what keeps its output off; None: nothing that it knows of."""
        seen = self.conditions()
        if seen.is_interlock_open:
            return self._trouble(
                "the interlock is open, so the output stays off",
                do="close it (door, lid, remote connector, key switch) once it is safe to, and start again",
            )
        if seen.is_tripped:
            return self._trouble(
                "a protection has tripped, so the output stays off",
                do="find what tripped it (a loose lead, a limit or a compliance too low, a diode that fails), "
                "clear the trip at the instrument, and start again",
            )
        return None

    def _trouble(self, what: str, *, do: str) -> InstrumentError:
        return InstrumentError(what, where=self._output.place, do=do)


def capabilities(options: Options) -> SourceCapabilities:
    """Return what a source can do, as the rig file describes it."""
    return SourceCapabilities(
        current_a=options["largest current"],
        compliance_v=options["largest compliance"],
        resolution_a=options["resolution"],
    )


DRIVER = Driver(
    name="scpi-current-source",
    kind="current source",
    family=SCPI,
    options={
        "channel": Option("whole number", default=1, meaning="number of the source in its instrument", sign="positive"),
        "largest current": Option("current", default=0.2, meaning="most that the source can drive", sign="positive"),
        "largest compliance": Option(
            "voltage", default=5.0, meaning="most voltage that the source can give", sign="positive"
        ),
        "resolution": Option("current", default=10e-6, meaning="smallest step of the setpoint", sign="positive"),
    },
    capabilities=capabilities,
    open=ScpiCurrentSource,
    meaning="current source for a laser diode that speaks SCPI",
)
