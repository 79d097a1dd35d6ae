"""Optical power meters that speak SCPI: the driver `scpi-power-meter`.

It owns the wire commands of a head. Readings come as one block per dwell, with the range and the status they
were taken under, in one exchange.

Source of the commands: SCPI-1999 volume 2 (SENSe, TRIGger, UNIT, FORMat, STATus), from memory; the header of
the wavelength is widespread convention.
"""

from collections.abc import Mapping

from rigctl.errors import LimitError
from rigctl.interfaces import Begun, Driver, Dwell, Flag, Identity, MeterCapabilities, Option, Options
from rigctl.links.link import Link
from rigctl_drivers.reading import reading
from rigctl_drivers.scpi_codec import (
    format_number,
    is_same_number,
    parse_bool,
    parse_length_unit_m,
    parse_number,
    parse_readings,
    parse_register,
)
from rigctl_drivers.scpi_family import SCPI
from rigctl_drivers.scpi_shell import QUESTIONABLE, ask, identify, not_taken, set_number, set_word

RANGE = "SENSE:POWER:RANGE:UPPER"
AUTO_RANGE = "SENSE:POWER:RANGE:AUTO"
APERTURE = "SENSE:POWER:APERTURE"
WAVELENGTH = "SENSE:CORRECTION:WAVELENGTH"
COUNT = "TRIGGER:COUNT"
UNIT = "UNIT:POWER"

BLOCK_SETTINGS = (
    ("INITIATE:CONTINUOUS", "OFF", "0"),
    ("TRIGGER:SOURCE", "IMMEDIATE", "IMMEDIATE"),
    ("SENSE:AVERAGE:STATE", "OFF", "0"),
    ("FORMAT:DATA", "ASCII", "ASCII"),
    (UNIT, "W", "W"),
)
"""Header, word and what it reads back as; together they make one dwell one block of plain readings in W."""

APERTURE_S = (1e-3, 10.0)
"""Shortest and longest integration that heads of this convention commonly offer, s; from memory."""
AGAIN_S = 0.02
"""A block that is not there when it is due comes within the overhead of a reading or two, s."""


class ScpiPowerMeter:
    """A head on its link."""

    def __init__(self, link: Link, options: Options) -> None:
        self.capabilities = capabilities(options)
        self._link = link
        self._readings, self._aperture_s = 1, APERTURE_S[0]

    def identify(self) -> Identity:
        """Ask who is there."""
        return identify(self._link, kind="power meter", probe=f"{RANGE}?")

    def settings(self) -> Mapping[str, str | float]:
        """Read back what the readings depend on."""
        names = (RANGE, AUTO_RANGE, APERTURE, COUNT, WAVELENGTH, UNIT)
        full_scale, auto, aperture, count, wavelength, unit = ask(self._link, *(f"{name}?" for name in names))
        with reading(self._link) as at:
            size_m = parse_length_unit_m(wavelength, address=at)
            return {
                "range_w": parse_number(full_scale, address=at),
                "ranging": "automatic" if parse_bool(auto, address=at) else "fixed",
                "aperture_s": parse_number(aperture, address=at),
                "readings": parse_number(count, address=at),
                "wavelength_m": parse_number(wavelength, address=at) * size_m,
                "unit": unit,
            }

    def set_wavelength(self, wavelength_m: float) -> None:
        """Set the wavelength of the light and read it back, in whatever unit the head answers."""
        asked = f"{format_number(wavelength_m * 1e9)} NM"
        (text,) = ask(self._link, f"{WAVELENGTH} {asked};:{WAVELENGTH}?")
        with reading(self._link) as at:
            size_m = parse_length_unit_m(text, address=at)
        if not is_same_number(wavelength_m, text, scale=size_m):
            raise not_taken(self._link, WAVELENGTH, asked=asked, answer=text)

    def set_range(self, full_scale_w: float | None) -> float:
        """Fix the smallest range that holds a power (None: automatic) and return its full scale, W."""
        if full_scale_w is not None:
            return set_number(self._link, RANGE, self._holding(full_scale_w))
        set_word(self._link, AUTO_RANGE, "ON", answer="1")
        (text,) = ask(self._link, f"{RANGE}?")
        with reading(self._link) as at:
            return parse_number(text, address=at)

    def set_dwell(self, readings: int, aperture_s: float) -> None:
        """Arrange for dwells of `readings` readings, each integrated over `aperture_s`."""
        shortest_s, longest_s = APERTURE_S
        if not shortest_s <= aperture_s <= longest_s:
            raise LimitError(
                f"a reading of {aperture_s:g} s is outside what this meter integrates",
                where=self._link.address,
                do=f"use a dwell whose readings last {shortest_s:g} s to {longest_s:g} s each",
            )
        for header, word, answer in BLOCK_SETTINGS:
            set_word(self._link, header, word, answer=answer)
        self._readings = round(set_number(self._link, COUNT, readings))
        self._aperture_s = set_number(self._link, APERTURE, aperture_s)

    def begin_dwell(self) -> Begun[Dwell]:
        """Start a block of readings; they all come back together once the last one ended."""
        began_s = self._link.timeline.now()
        self._link.write(b"ABORT;:INITIATE:IMMEDIATE\n")
        duration_s = self._readings * self._aperture_s
        due_s = began_s + duration_s
        return Begun(
            due_s=due_s,
            poll=lambda: self._fetch(began_s, due_s),
            again_s=AGAIN_S,
            give_up_s=due_s + duration_s + 2.0 * SCPI.longest_s,
        )

    def _fetch(self, began_s: float, ended_s: float) -> Dwell:
        """Take the block; the instrument holds its reply back while it still measures."""
        duration_s = ended_s - began_s
        block, full_scale, status = ask(
            self._link, "FETCH?", f"{RANGE}?", QUESTIONABLE, timeout_s=SCPI.reply_timeout_s + duration_s
        )
        with reading(self._link) as at:
            levels_w, flags = parse_readings(block, count=self._readings, address=at)
            range_w = parse_number(full_scale, address=at)
            if parse_register(status, address=at) != 0:
                flags |= Flag.QUESTIONABLE
        return Dwell(levels_w, flags, range_w=range_w, began_s=began_s, ended_s=ended_s)

    def _holding(self, power_w: float) -> float:
        """Return the smallest range that holds a power; one that is a range itself is taken as it is."""
        for full_scale_w in self.capabilities.ranges_w:
            if power_w <= full_scale_w * (1.0 + 1e-6):
                return full_scale_w
        raise LimitError(
            f"{power_w:g} W is more than the largest range, {self.capabilities.ranges_w[-1]:g} W",
            where=self._link.address,
            do="attenuate the beam, or give all ranges of this meter in the rig file",
        )


def capabilities(options: Options) -> MeterCapabilities:
    """Return what a head can do, as the rig file describes it.

    The noise belongs to the smallest range and grows in proportion to the full scale.
    """
    ranges_w = tuple(sorted(options["ranges"]))
    saturation_w = options["saturation"]
    return MeterCapabilities(
        ranges_w=ranges_w,
        time_constant_s=(options["time constant"],) * len(ranges_w),
        noise_w=tuple(options["noise"] * full_scale_w / ranges_w[0] for full_scale_w in ranges_w),
        relative_noise=options["relative noise"],
        saturation_w=ranges_w[-1] if saturation_w is None else saturation_w,
        aperture_s=APERTURE_S,
    )


DRIVER = Driver(
    name="scpi-power-meter",
    kind="power meter",
    family=SCPI,
    options={
        "ranges": Option(
            "list of power",
            default=(2e-6, 2e-5, 2e-4, 2e-3, 2e-2),
            meaning="full scale of each range of the head",
            sign="positive",
        ),
        "time constant": Option("time", default=10e-3, meaning="how fast the head follows the light"),
        "noise": Option(
            "power",
            default=20e-12,
            meaning="standard deviation of a reading on the smallest range",
            sign="not negative",
        ),
        "relative noise": Option(
            "ratio",
            default=5e-4,  # common practice for a diode on a quiet driver
            meaning="scatter of a reading that grows with the power, the source's included",
        ),
        "saturation": Option(
            "power", meaning="power at which the head itself saturates; default: top range", sign="positive"
        ),
    },
    capabilities=capabilities,
    open=ScpiPowerMeter,
    meaning="optical power meter that speaks SCPI",
)
