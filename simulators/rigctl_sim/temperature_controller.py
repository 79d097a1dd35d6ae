"""A simulated temperature controller: what its commands set, what it measures, and where it drives its plant.

It owns setpoint, limits and the constants it was told of its sensor. It knows a temperature only through a
resistance: told the constants of another sensor, it regulates to another temperature and does not know it.
"""

import math
from collections.abc import Iterable, Iterator
from dataclasses import dataclass

from rigctl.thermistor import Beta, SteinhartHart, Thermistor
from rigctl_sim.plant import Plant
from rigctl_sim.scpi.complaint import Complaint
from rigctl_sim.scpi.parameters import boolean, number
from rigctl_sim.scpi.response import NOT_A_NUMBER, nr3
from rigctl_sim.scpi.status import Status
from rigctl_sim.scpi.syntax import Command

TEMPERATURE_QUESTIONABLE = 1 << 4
"""Bit of the questionable register: SCPI-1999 volume 1, 9.4."""
OPEN_OHM = "9.900000E+37"
"""How an instrument writes the resistance of an open sensor: SCPI-1999 volume 1, 7.2.1.4."""
FIRST_C = 25.0
FIRST_CURVE = SteinhartHart(1.12924e-3, 2.34108e-4, 8.7755e-8)
FIRST_BETA = Beta(1e4, 25.0, 3976.0)
"""What it takes its sensor for after power-on: the common curve of 10 kOhm at 25 degC, published by several makers."""
_DIGITS = 9
_A, _B, _C = number("", -1.0, 1.0, default=0.0), number("", 1e-9, 1.0, default=1e-4), number("", 0.0, 1.0, default=0.0)
_R0, _BETA = number("OHM", 1.0, 1e9, default=1e4), number("", 1.0, 1e5, default=3976.0)
_T0 = number("", -270.0, 1000.0, default=25.0)


@dataclass(frozen=True, slots=True)
class ControllerMake:
    """How a controller and its sensor are built.

    Parameters
    ----------
    span_c
        Setpoints it takes, degC.
    resolution_k
        Step of its setpoint.
    sensor
        What the sensor really is.
    noise_k
        Standard deviation of one measurement.
    sensor_breaks_at_s
        Instant from which the sensor is open, for good; the controller then drives no more.
    """

    span_c: tuple[float, float]
    resolution_k: float
    sensor: Thermistor
    noise_k: float
    sensor_breaks_at_s: float = math.inf


class SimulatedTemperatureController:
    """A temperature controller behind an SCPI wire.

    Parameters
    ----------
    noise
        Numbers of the standard normal distribution, its own.
    channel
        The numeric suffix of its commands.
    """

    def __init__(
        self,
        make: ControllerMake,
        plant: Plant,
        noise: Iterator[float],
        *,
        channel: int = 1,
        status: Status | None = None,
    ) -> None:
        self.status = status or Status()
        self._make, self._plant, self._noise, self._channel = make, plant, noise, channel
        self._measured: tuple[float, float] = (-math.inf, 0.0)
        self._set_first()

    def commands(self) -> Iterable[Command]:
        """Return its commands: SCPI-1999 has the subsystems; the leaves are wide-spread convention."""
        return (*self._setting_commands(), *self._sensor_commands(), *self._measuring_commands())

    def catch_up(self, now_s: float) -> None:
        """Notice a sensor that has broken, and a temperature outside the limits while it regulates."""
        is_broken = now_s >= self._make.sensor_breaks_at_s
        if is_broken:
            self._is_on = False
        is_outside = self._is_on and not self._low_c <= self._shown_c(self._plant(now_s)) <= self._high_c
        is_set = is_broken or is_outside
        self.status.questionable.set_bit(TEMPERATURE_QUESTIONABLE, is_set, channel=self._channel)

    def busy_until_s(self) -> float:
        """Return an instant that is past: nobody waits here for a temperature."""
        return 0.0

    def reset(self, now_s: float) -> None:
        """Stop regulating and go back to the settings after power-on."""
        self._set_first()
        self._plant.leave(now_s)

    def _set_first(self) -> None:
        self._low_c, self._high_c = self._make.span_c
        self._setpoint_c = min(max(FIRST_C, self._low_c), self._high_c)
        self._curve, self._beta = FIRST_CURVE, FIRST_BETA
        self._taken_for: Thermistor = FIRST_CURVE
        self._is_on = False

    def _setting_commands(self) -> tuple[Command, ...]:
        celsius = number("CEL", *self._make.span_c, default=self._setpoint_c)
        head, channel = "[SOURce#]:TEMPerature", self._channel
        return (
            Command(f"{head}:SPOint", self._set_setpoint, (celsius,), channel=channel),
            Command(f"{head}:SPOint?", lambda _: nr3(self._setpoint_c), channel=channel),
            Command(f"{head}:LIMit:LOW", self._set_low, (celsius,), channel=channel),
            Command(f"{head}:LIMit:LOW?", lambda _: nr3(self._low_c), channel=channel),
            Command(f"{head}:LIMit:HIGH", self._set_high, (celsius,), channel=channel),
            Command(f"{head}:LIMit:HIGH?", lambda _: nr3(self._high_c), channel=channel),
            Command("OUTPut#[:STATe]", self._switch, (boolean,), channel=channel),
            Command("OUTPut#[:STATe]?", lambda _: f"{self._is_on:d}", channel=channel),
        )

    def _sensor_commands(self) -> tuple[Command, ...]:
        head, channel = "[SENSe#]:TEMPerature:THERmistor", self._channel
        return (
            Command(f"{head}:SHHart", self._set_curve, (_A, _B, _C), channel=channel),
            Command(
                f"{head}:SHHart?", lambda _: _constants(self._curve.a, self._curve.b, self._curve.c), channel=channel
            ),
            Command(f"{head}:BETA", self._set_beta, (_R0, _T0, _BETA), channel=channel),
            Command(
                f"{head}:BETA?",
                lambda _: _constants(self._beta.r0_ohm, self._beta.t0_c, self._beta.beta_k),
                channel=channel,
            ),
        )

    def _measuring_commands(self) -> tuple[Command, ...]:
        head, channel = "MEASure#[:SCALar]", self._channel
        return (
            Command(f"{head}:TEMPerature?", self._measured_temperature, channel=channel),
            Command(f"{head}:RESistance?", self._measured_resistance, channel=channel),
        )

    def _set_setpoint(self, at_s: float, setpoint_c: float) -> None:
        if not self._low_c <= setpoint_c <= self._high_c:
            raise Complaint(-222)
        step_k = self._make.resolution_k
        self._setpoint_c = round(setpoint_c / step_k) * step_k
        self._drive(at_s)

    def _set_low(self, at_s: float, low_c: float) -> None:
        """Set the lower limit; a setpoint below it moves up to it."""
        if low_c > self._high_c:
            raise Complaint(-221)
        self._low_c, self._setpoint_c = low_c, max(self._setpoint_c, low_c)
        self._drive(at_s)

    def _set_high(self, at_s: float, high_c: float) -> None:
        """Set the upper limit; a setpoint above it moves down to it."""
        if high_c < self._low_c:
            raise Complaint(-221)
        self._high_c, self._setpoint_c = high_c, min(self._setpoint_c, high_c)
        self._drive(at_s)

    def _set_curve(self, at_s: float, a: float, b: float, c: float) -> None:
        curve = SteinhartHart(a, b, c)
        self._take_for(curve, at_s)
        self._curve = curve

    def _set_beta(self, at_s: float, r0_ohm: float, t0_c: float, beta_k: float) -> None:
        beta = Beta(r0_ohm, t0_c, beta_k)
        self._take_for(beta, at_s)
        self._beta = beta

    def _take_for(self, sensor: Thermistor, at_s: float) -> None:
        """Take the sensor for one with such constants; refuse those that lead nowhere within the span."""
        try:
            reached = [self._make.sensor.temperature_c(sensor.resistance_ohm(end)) for end in self._make.span_c]
        except OverflowError:
            reached = [math.inf]
        if not all(map(math.isfinite, reached)):
            raise Complaint(-222)
        self._taken_for = sensor
        self._drive(at_s)

    def _switch(self, at_s: float, is_on: bool) -> None:
        if is_on and at_s >= self._make.sensor_breaks_at_s:
            raise Complaint(-221)
        if not is_on:
            self._plant.leave(at_s)
        self._is_on = is_on
        self._drive(at_s)

    def _drive(self, at_s: float) -> None:
        """Go for the temperature at which the sensor has the resistance that the setpoint is taken for.

        The plant goes no further than it can, whatever the constants make of the setpoint.
        """
        if self._is_on:
            wanted_ohm = self._taken_for.resistance_ohm(self._setpoint_c)
            low_c, high_c = self._make.span_c
            self._plant.regulate(at_s, min(max(self._make.sensor.temperature_c(wanted_ohm), low_c), high_c))

    def _shown_c(self, true_c: float) -> float:
        return self._taken_for.temperature_c(self._make.sensor.resistance_ohm(true_c))

    def _sensed_c(self, at_s: float) -> float:
        """What the sensor says of the true temperature; questions at one instant share a measurement."""
        if self._measured[0] != at_s:
            self._measured = (at_s, self._plant(at_s) + self._make.noise_k * next(self._noise))
        return self._measured[1]

    def _measured_temperature(self, at_s: float) -> str:
        if at_s >= self._make.sensor_breaks_at_s:
            return NOT_A_NUMBER
        return nr3(self._shown_c(self._sensed_c(at_s)))

    def _measured_resistance(self, at_s: float) -> str:
        if at_s >= self._make.sensor_breaks_at_s:
            return OPEN_OHM
        return nr3(self._make.sensor.resistance_ohm(self._sensed_c(at_s)))


def _constants(*values: float) -> str:
    return ",".join(nr3(value, digits=_DIGITS) for value in values)
