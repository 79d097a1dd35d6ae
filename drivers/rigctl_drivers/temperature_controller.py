"""Temperature controllers that speak SCPI: the driver `scpi-temperature-controller`.

It owns the wire commands of a controller and when a sensor's reading is no temperature.

Source of the commands: SCPI-1999 volume 2 (OUTPut, STATus), from memory; setpoint, limits, measurements and the
constants of the sensor are widespread convention.
"""

from collections.abc import Mapping
from dataclasses import astuple

from rigctl.errors import InstrumentError
from rigctl.interfaces import ControllerCapabilities, ControllerConditions, Driver, Identity, Option, Options
from rigctl.links.link import Link
from rigctl.thermistor import Beta, SteinhartHart
from rigctl_drivers.output import Output
from rigctl_drivers.reading import reading
from rigctl_drivers.scpi_codec import parse_number, parse_numbers, parse_reading, parse_register
from rigctl_drivers.scpi_family import SCPI
from rigctl_drivers.scpi_shell import QUESTIONABLE, ask, identify, look, refused, set_number, set_numbers

AT_LIMIT = 1 << 4
"""Bit of the questionable register. Source: SCPI-1999 volume 1, 9.4."""
ROOM_C = (0.0, 40.0)
"""Where a plant may be while nothing regulates it, degC."""
BEYOND_K = 40.0
"""How far beyond its plant and the room a sensor that is whole never reads, K."""
DISAGREE_K = 0.5
"""Constants that an instrument rounds move a temperature by less than this, those of another sensor by more, K."""
LIMIT_STEP_K = 0.1
"""Limits are coarse settings; common practice."""


class ScpiTemperatureController:
    """One channel of a controller on its link."""

    def __init__(self, link: Link, options: Options) -> None:
        self.capabilities = capabilities(options)
        self._link = link
        self._sensor: SteinhartHart | Beta | None = options["thermistor"]
        self._is_sensor_programmed = False
        channel = options["channel"]
        self._setpoint = f"SOURCE{channel}:TEMPERATURE:SPOINT"
        self._lowest = f"SOURCE{channel}:TEMPERATURE:LIMIT:LOW"
        self._highest = f"SOURCE{channel}:TEMPERATURE:LIMIT:HIGH"
        form = "BETA" if isinstance(self._sensor, Beta) else "SHHART"
        self._constants = f"SENSE{channel}:TEMPERATURE:THERMISTOR:{form}"
        self._output = Output(link, channel, why_off=self._why_off)
        self._conditions = (
            f"MEASURE{channel}:TEMPERATURE?",
            f"MEASURE{channel}:RESISTANCE?",
            self._output.query,
            QUESTIONABLE,
        )

    def identify(self) -> Identity:
        """Ask who is there."""
        return identify(self._link, kind="temperature controller", probe=f"{self._setpoint}?")

    def settings(self) -> Mapping[str, str | float]:
        """Read back setpoint, limits, output and the constants that temperatures come from."""
        numbers = (f"{name}?" for name in (self._setpoint, self._lowest, self._highest))
        setpoint, lowest, highest, output = ask(self._link, *numbers, self._output.query)
        with reading(self._link) as at:
            found: dict[str, str | float] = {
                "setpoint_c": parse_number(setpoint, address=at),
                "lowest_c": parse_number(lowest, address=at),
                "highest_c": parse_number(highest, address=at),
            }
        return found | {"output": "on" if self._output.is_on(output) else "off", "thermistor": self._read_sensor()}

    def set_span(self, low_c: float, high_c: float) -> None:
        """Program the sensor's constants and the instrument's own temperature limits, and read both back.

        Limits in degC mean what they say only once the instrument has the right constants.

        Raises
        ------
        InstrumentError
            The sensor is open or shorted, or the instrument makes another temperature of it.
        """
        if self._sensor is not None:
            set_numbers(self._link, self._constants, astuple(self._sensor))
            self._is_sensor_programmed = True
        (text,) = ask(self._link, f"{self._highest}?")
        with reading(self._link) as at:
            limits = [(self._lowest, low_c), (self._highest, high_c)]
            if low_c >= parse_number(text, address=at):
                limits.reverse()  # the lower limit may never stand above the upper one
        for header, limit_c in limits:
            set_number(self._link, header, limit_c, step=LIMIT_STEP_K)
        self.conditions()

    def set_temperature(self, temperature_c: float) -> float:
        """Set the setpoint and return it as read back, degC."""
        return set_number(self._link, self._setpoint, temperature_c, step=self.capabilities.resolution_k)

    def set_output(self, is_on: bool) -> bool:
        """Start or end regulating and return the state as read back.

        Raises
        ------
        InstrumentError
            It does not start, and why; or it does not end.
        RefusedError, LinkError
            Its state cannot be read back.
        """
        return self._output.switch_on() if is_on else self._output.switch_off()

    def conditions(self) -> ControllerConditions:
        """Read temperature, sensor resistance and state, in one exchange.

        Raises
        ------
        InstrumentError
            The sensor is open or shorted, or the instrument makes another temperature of it than its constants do.
        RefusedError
            The instrument complains of something that the conditions do not show.
        """
        reply = look(self._link, *self._conditions)
        temperature, resistance, output, status = reply.values
        with reading(self._link) as at:
            shown_c, resistance_ohm = (parse_reading(text, address=at) for text in (temperature, resistance))
            seen = ControllerConditions(
                temperature_c=self._temperature_c(shown_c, resistance_ohm),
                resistance_ohm=resistance_ohm,
                is_on=self._output.is_on(output),
                is_at_limit=bool(parse_register(status, address=at) & AT_LIMIT),
            )
        if reply.complaint.code and not seen.is_at_limit:
            raise refused(self._link, *self._conditions, complaint=reply.complaint)
        return seen

    def _temperature_c(self, shown_c: float, resistance_ohm: float) -> float:
        """Return what the sensor's constants make of its resistance; without constants, what the instrument shows."""
        sensor = self._sensor
        temperature_c = shown_c if sensor is None else sensor.temperature_c(resistance_ohm)
        coldest_c = min(self.capabilities.span_c[0], ROOM_C[0]) - BEYOND_K
        hottest_c = max(self.capabilities.span_c[1], ROOM_C[1]) + BEYOND_K
        if not coldest_c <= temperature_c <= hottest_c:
            raise self._trouble(
                f"the sensor reads {resistance_ohm:.4g} ohm, or {temperature_c:.4g} degC, which is no temperature "
                f"between {coldest_c:g} and {hottest_c:g} degC: it is open, shorted or not the one of the rig file",
                do="look at the sensor and its leads; compare `thermistor` in the rig file with its data sheet",
            )
        if self._is_sensor_programmed and not abs(shown_c - temperature_c) <= DISAGREE_K:
            raise self._trouble(
                f"the instrument shows {shown_c:.2f} degC where its sensor's constants give {temperature_c:.2f} degC",
                do="see that it shows degC, uses the constants it was given, and was not switched off meanwhile",
            )
        return temperature_c

    def _read_sensor(self) -> str:
        """Read the constants back and write them as a rig file does."""
        if self._sensor is None:
            return "as set on the instrument"
        (text,) = ask(self._link, f"{self._constants}?")
        with reading(self._link) as at:
            return str(type(self._sensor)(*parse_numbers(text, count=3, address=at)))

    def _why_off(self) -> InstrumentError | None:
        """Ask the instrument what keeps it from regulating; a fault of the sensor raises by itself."""
        if self.conditions().is_at_limit:
            return self._trouble(
                "a temperature limit keeps it from regulating",
                do="let the plant come back between its limits, or widen them in the rig file",
            )
        return None

    def _trouble(self, what: str, *, do: str) -> InstrumentError:
        return InstrumentError(what, where=self._output.place, do=do)


def capabilities(options: Options) -> ControllerCapabilities:
    """Return what a controller can do, as the rig file describes it."""
    return ControllerCapabilities(
        span_c=options["span"],
        resolution_k=options["resolution"],
        typical_rate_k_per_s=options["typical rate"],
    )


DRIVER = Driver(
    name="scpi-temperature-controller",
    kind="temperature controller",
    family=SCPI,
    options={
        "channel": Option(
            "whole number", default=1, meaning="number of the controller in its instrument", sign="positive"
        ),
        "thermistor": Option(
            "thermistor", meaning="constants of the sensor; default: temperatures are what the instrument shows"
        ),
        "span": Option("span of temperature", default=(5.0, 80.0), meaning="what its plant can reach"),
        "resolution": Option(
            "temperature difference", default=1e-3, meaning="smallest step of the setpoint", sign="positive"
        ),
        "typical rate": Option(
            "temperature slope", default=0.05, meaning="how fast a setpoint is approached, for forecasts"
        ),
    },
    capabilities=capabilities,
    open=ScpiTemperatureController,
    meaning="temperature controller with a thermistor that speaks SCPI",
)
