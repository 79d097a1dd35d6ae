"""Switch units that speak SCPI, with a shutter on one of their relays: the driver `scpi-switch`.

It owns the wire commands of a relay and which of its states lets the light through.
"""

from collections.abc import Mapping

from rigctl.interfaces import Begun, Driver, Identity, Option, Options, ShutterCapabilities
from rigctl.links.link import Link
from rigctl_drivers.reading import reading
from rigctl_drivers.scpi_codec import parse_bool
from rigctl_drivers.scpi_family import SCPI
from rigctl_drivers.scpi_shell import ask, identify, not_taken

OPEN, CLOSED = "open", "closed"


class ScpiSwitch:
    """A shutter on a relay; a relay is closed when current flows through it.

    Source
    ------
    SCPI-1999 volume 2, ROUTe subsystem: `ROUTe:CLOSe`, `ROUTe:CLOSe?`, `ROUTe:OPEN`; from memory.
    """

    def __init__(self, link: Link, options: Options) -> None:
        self.capabilities = capabilities(options)
        self._link = link
        self._channels = f"(@{options['channel']})"
        self._at_rest: str = options["at rest"]

    def identify(self) -> Identity:
        """Ask who is there."""
        return identify(self._link, kind="switch", probe=f"ROUTE:CLOSE? {self._channels}")

    def settings(self) -> Mapping[str, str | float]:
        """Read back the shutter's state; the rest is wiring."""
        return {"shutter": OPEN if self.is_open() else CLOSED, "at rest": self._at_rest}

    def begin_set(self, is_open: bool) -> Begun[bool]:
        """Start to open or close; yields the state read back.

        Raises
        ------
        RefusedError
            The unit complains, or its relay reads back in the other state.
        """
        began_s = self._link.timeline.now()
        is_closed = self._relay_closed_when(is_open)
        header = "ROUTE:CLOSE" if is_closed else "ROUTE:OPEN"
        (text,) = ask(self._link, f"{header} {self._channels};:ROUTE:CLOSE? {self._channels}")
        if self._relay_state(text) != is_closed:
            asked, answer = (CLOSED, OPEN) if is_closed else (OPEN, CLOSED)
            raise not_taken(self._link, f"the relay {self._channels}", asked=asked, answer=answer)
        due_s = began_s + self.capabilities.moves_in_s
        return Begun(due_s=due_s, poll=self.is_open, again_s=0.05, give_up_s=due_s + SCPI.longest_s)

    def is_open(self) -> bool:
        """Read the state back now."""
        (text,) = ask(self._link, f"ROUTE:CLOSE? {self._channels}")
        return self._relay_closed_when(is_open=True) == self._relay_state(text)

    def _relay_closed_when(self, is_open: bool) -> bool:
        """Whether the relay must be closed for the shutter to be open, or closed."""
        return is_open != (self._at_rest == OPEN)

    def _relay_state(self, text: str) -> bool:
        with reading(self._link) as at:
            return parse_bool(text, address=at)


def capabilities(options: Options) -> ShutterCapabilities:
    """Return what the shutter can do, as the rig file describes it."""
    return ShutterCapabilities(moves_in_s=options["moves in"])


DRIVER = Driver(
    name="scpi-switch",
    kind="shutter",
    family=SCPI,
    options={
        "channel": Option("whole number", default=1, meaning="relay that drives the shutter"),
        "at rest": Option(
            "choice",
            default=CLOSED,
            choices=(OPEN, CLOSED),
            meaning="what the shutter is while its relay is open",
        ),
        "moves in": Option("time", default=20e-3, meaning="time from one state to the other"),
    },
    capabilities=capabilities,
    open=ScpiSwitch,
    meaning="shutter on a relay of a switch unit that speaks SCPI",
)
