"""The output of an instrument that drives something: on with a reason where it refuses, off come what may.

It owns the wire commands of an output and how sure its states are. It clears no protection: that is for somebody who
has found the cause.
"""

from collections.abc import Callable

from rigctl.errors import InstrumentError, RefusedError
from rigctl.links.link import Link
from rigctl_drivers.reading import reading
from rigctl_drivers.scpi_codec import parse_bool
from rigctl_drivers.scpi_shell import ask, insist


class Output:
    """One channel's output; `place` is what messages call it.

    Parameters
    ----------
    why_off
        Asks the instrument what keeps the output off; None: nothing that it knows of.

    Source
    ------
    SCPI-1999 volume 2, OUTPut subsystem: `OUTPut:STATe`; from memory.
    """

    def __init__(self, link: Link, channel: int, *, why_off: Callable[[], InstrumentError | None]) -> None:
        self._link, self._why_off = link, why_off
        self._state = f"OUTPUT{channel}:STATE"
        self.place = f"{link.address}, channel {channel}"

    @property
    def query(self) -> str:
        """The query of its state, for a message of the driver's own."""
        return f"{self._state}?"

    def switch_on(self) -> bool:
        """Switch on and return True.

        Raises
        ------
        InstrumentError
            It stays off; in words where the instrument knows why.
        RefusedError
            The instrument complains of something else.
        """
        try:
            (text,) = ask(self._link, f"{self._state} ON;:{self.query}")
        except RefusedError as error:
            if (why := self._why_off()) is not None:
                raise why from error
            raise
        if self.is_on(text):
            return True
        raise self._why_off() or InstrumentError(
            "the output does not go on",
            where=self.place,
            do="look at the instrument: its key switch, its remote mode, its display",
        )

    def switch_off(self) -> bool:
        """Switch off and return False.

        It is sent at once, whatever became of earlier exchanges, and confirmed whatever else is complained of.

        Raises
        ------
        InstrumentError
            It reads back on; or its state cannot be read back, and it must be taken as on.
        """
        if self.is_on(insist(self._link, f"{self._state} OFF", self.query)):
            raise InstrumentError(
                "the output reads back on after it was switched off",
                where=self.place,
                do="switch it off by hand now, with its key or at the mains",
            )
        return False

    def is_on(self, text: str) -> bool:
        """Read the answer to `query`."""
        with reading(self._link) as at:
            return parse_bool(text, address=at)
