"""A simulated optical power meter: what its commands set, and what it reads.

It owns ranges, apertures, overload and noise. The head in the light is `head`; the wire is `scpi.twin`.
Readings are worked out when they have ended, from what the head showed then.
"""

import math
from collections.abc import Iterable, Iterator
from dataclasses import dataclass, replace

from rigctl_sim.head import Head
from rigctl_sim.scpi.complaint import Complaint
from rigctl_sim.scpi.parameters import boolean, choice, number, range_or_word, whole_number
from rigctl_sim.scpi.response import nr3
from rigctl_sim.scpi.status import Status
from rigctl_sim.scpi.syntax import Command, Wait

OVERLOAD = 9.9e37
"""What stands for positive infinity: SCPI-1999 volume 1, 7.2.1.4."""
MEASURING = 1 << 4
"""Bit of the operation register: SCPI-1999 volume 1, 9.3."""
POWER_QUESTIONABLE = 1 << 3
"""Bit of the questionable register: SCPI-1999 volume 1, 9.4."""
MOST_READINGS = 10_000
_WAVELENGTH_M = (200e-9, 2500e-9)
_IDLE_S = -math.inf


@dataclass(frozen=True, slots=True)
class MeterMake:
    """How a meter is built.

    Parameters
    ----------
    ranges_w
        Full scales in ascending order, W.
    time_constants_s, noise_w
        One for each range: lag of the head, and standard deviation of one reading in the dark.
    relative_noise
        Standard deviation that grows with the power, relative to it.
    saturation_w
        Power that the head cannot go beyond, W.
    apertures_s
        Shortest and longest integration, s.
    """

    ranges_w: tuple[float, ...]
    time_constants_s: tuple[float, ...]
    noise_w: tuple[float, ...]
    relative_noise: float
    saturation_w: float
    apertures_s: tuple[float, float]


@dataclass(frozen=True, slots=True)
class Settings:
    """What the commands set; the defaults are those after `*RST`."""

    range_number: int
    is_auto: bool = True
    aperture_s: float = 0.1
    count: int = 1
    is_averaged: bool = False
    averaged: int = 10
    is_continuous: bool = False
    wavelength_m: float = 633e-9

    @property
    def reading_s(self) -> float:
        """Length of one reading, s."""
        return self.aperture_s * (self.averaged if self.is_averaged else 1)

    @property
    def block_s(self) -> float:
        """Length of all readings of one trigger, s."""
        return self.count * self.reading_s


class SimulatedPowerMeter:
    """A meter behind an SCPI wire.

    Parameters
    ----------
    noise
        Numbers of the standard normal distribution, its own.
    """

    def __init__(self, make: MeterMake, head: Head, noise: Iterator[float], *, status: Status | None = None) -> None:
        self.status = status or Status()
        self._make, self._head, self._noise = make, head, noise
        self._settings = self._first_settings()
        self._begin_s: float | None = None
        self._end_s = self._runs_from_s = _IDLE_S
        self._levels = ""

    def commands(self) -> Iterable[Command]:
        """Return its commands: SCPI-1999 volume 2, chapters 2, 6, 18, 23 and 24."""
        return (*self._trigger_commands(), *self._range_commands(), *self._setting_commands())

    def catch_up(self, now_s: float) -> None:
        """Work out readings that have ended by now."""
        if self._begin_s is not None and self._end_s <= now_s:
            self._levels = self._measured(self._begin_s)
            self._begin_s = None
            self.status.operation.set_bit(MEASURING, False)

    def busy_until_s(self) -> float:
        """Return the end of the measurement under way."""
        return self._end_s

    def reset(self, _now_s: float) -> None:
        """Go back to the settings after power-on."""
        self._forget()
        self._settings = self._first_settings()

    def _first_settings(self) -> Settings:
        return Settings(range_number=len(self._make.ranges_w) - 1)

    def _trigger_commands(self) -> tuple[Command, ...]:
        count = whole_number(1, MOST_READINGS, default=1)
        return (
            Command("ABORt", lambda _: self._forget()),
            Command("INITiate#[:IMMediate]", self._initiate),
            Command("INITiate#:CONTinuous", self._set_continuous, (boolean,)),
            Command("INITiate#:CONTinuous?", lambda _: f"{self._settings.is_continuous:d}"),
            Command("FETCh#[:POWer][:DC]?", self._fetch),
            Command("READ#[:POWer][:DC]?", self._read),
            Command("TRIGger#[:SEQuence]:SOURce", lambda _, _word: None, (choice("IMMediate"),)),
            Command("TRIGger#[:SEQuence]:SOURce?", lambda _: "IMM"),
            Command("TRIGger#[:SEQuence]:COUNt", lambda _, value: self._set(count=value), (count,)),
            Command("TRIGger#[:SEQuence]:COUNt?", lambda _: str(self._settings.count)),
        )

    def _range_commands(self) -> tuple[Command, ...]:
        ranges = self._make.ranges_w
        full_scale = number("W", 0.0, ranges[-1], default=ranges[-1])
        head = "[SENSe#]:POWer[:DC]:RANGe"
        return (
            Command(f"{head}[:UPPer]", self._set_range, (full_scale,)),
            Command(f"{head}[:UPPer]?", self._range, (range_or_word,), needs=0),
            Command(f"{head}:AUTO", lambda _, is_on: self._set(is_auto=is_on), (boolean,)),
            Command(f"{head}:AUTO?", lambda _: f"{self._settings.is_auto:d}"),
        )

    def _setting_commands(self) -> tuple[Command, ...]:
        aperture = number("S", *self._make.apertures_s, default=0.1)
        averaged = whole_number(1, MOST_READINGS, default=10)
        wavelength = number("M", *_WAVELENGTH_M, default=633e-9)
        return (
            Command("[SENSe#]:POWer[:DC]:APERture", lambda _, t: self._set(aperture_s=t), (aperture,)),
            Command("[SENSe#]:POWer[:DC]:APERture?", lambda _: nr3(self._settings.aperture_s)),
            Command("[SENSe#]:AVERage[:STATe]", lambda _, is_on: self._set(is_averaged=is_on), (boolean,)),
            Command("[SENSe#]:AVERage[:STATe]?", lambda _: f"{self._settings.is_averaged:d}"),
            Command("[SENSe#]:AVERage:COUNt", lambda _, n: self._set(averaged=n), (averaged,)),
            Command("[SENSe#]:AVERage:COUNt?", lambda _: str(self._settings.averaged)),
            Command("[SENSe#]:CORRection:WAVelength", lambda _, w: self._set(wavelength_m=w), (wavelength,)),
            Command("[SENSe#]:CORRection:WAVelength?", lambda _: nr3(self._settings.wavelength_m)),
            Command("UNIT:POWer", lambda _, _word: None, (choice("W"),)),
            Command("UNIT:POWer?", lambda _: "W"),
            Command("FORMat[:DATA]", lambda _, _word: None, (choice("ASCii"),)),
            Command("FORMat[:DATA]?", lambda _: "ASC"),
        )

    def _set(self, **changes: object) -> None:
        """Change settings; what was measured with the old ones is stale from then on."""
        self._forget()
        self._settings = replace(self._settings, **changes)  # type: ignore[arg-type]  # the table above types them

    def _set_range(self, _at_s: float, full_scale_w: float) -> None:
        self._set(range_number=self._range_for(full_scale_w), is_auto=False)

    def _range_for(self, power_w: float) -> int:
        ranges = self._make.ranges_w
        # a range named by its rounded value is meant itself
        return next((n for n, full in enumerate(ranges) if power_w <= full * (1 + 1e-6)), len(ranges) - 1)

    def _range(self, _at_s: float, word: str = "") -> str:
        ranges = self._make.ranges_w
        named = {"MIN": ranges[0], "MAX": ranges[-1], "DEF": ranges[-1]}
        return nr3(named.get(word, ranges[self._settings.range_number]))

    def _set_continuous(self, at_s: float, is_on: bool) -> None:
        self._set(is_continuous=is_on)
        self._runs_from_s = at_s

    def _initiate(self, at_s: float) -> None:
        """Start a block of readings; -213 while one is under way: SCPI-1999 volume 2, 24.3."""
        if self._settings.is_continuous or self._begin_s is not None:
            raise Complaint(-213)
        self._levels, self._begin_s = "", at_s
        self._end_s = at_s + self._settings.block_s
        self.status.operation.set_bit(MEASURING, True)

    def _read(self, at_s: float) -> Wait:
        """Do ABORt, INITiate and FETCh?: SCPI-1999 volume 2, 3.4."""
        self._forget()
        self._initiate(at_s)
        return Wait(self._end_s, self._fetch)

    def _fetch(self, at_s: float) -> str | Wait:
        """Answer with the last block of readings, or wait for the one under way: SCPI-1999 volume 2, 3.2."""
        if self._settings.is_continuous:
            return self._latest(at_s)
        if self._begin_s is not None:
            return Wait(self._end_s, self._fetch)
        if not self._levels:
            raise Complaint(-230)
        return self._levels

    def _latest(self, at_s: float) -> str | Wait:
        """Answer with the block that ends now, once the meter has run for long enough."""
        block_s = self._settings.block_s
        if at_s < self._runs_from_s + block_s:
            return Wait(self._runs_from_s + block_s, self._latest)
        return self._measured(at_s - block_s)

    def _forget(self) -> None:
        self._begin_s, self._end_s, self._levels = None, _IDLE_S, ""
        self.status.operation.set_bit(MEASURING, False)

    def _measured(self, begin_s: float) -> str:
        reading_s, count = self._settings.reading_s, self._settings.count
        edges = [begin_s + number * reading_s for number in range(count + 1)]
        levels = [self._reading(edges[number], edges[number + 1]) for number in range(count)]
        self.status.questionable.set_bit(POWER_QUESTIONABLE, OVERLOAD in levels)
        return ",".join([f"{level:.6E}" for level in levels])

    def _reading(self, begin_s: float, end_s: float) -> float:
        """Read the head once; with automatic range on the range that holds the power."""
        make, number = self._make, self._settings.range_number
        lag_s = make.time_constants_s[number]
        power = self._head.mean_w(begin_s, end_s, time_constant_s=lag_s)
        if self._settings.is_auto:
            number = self._range_for(power)
            self._settings = replace(self._settings, range_number=number)
        scatter = math.hypot(make.noise_w[number], make.relative_noise * power)
        level = power + scatter * next(self._noise)
        return OVERLOAD if level > min(make.ranges_w[number], make.saturation_w) else level
