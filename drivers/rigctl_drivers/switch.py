"""Shutters on a relay of a switch unit that speaks SCPI: the driver `scpi-switch`.

It owns which state of the relay lets the light through.
"""

from collections.abc import Mapping

from rigctl.interfaces import Begun, Driver, Identity, Option, Options, ShutterCapabilities
from rigctl.links.link import Link
from rigctl_drivers.contact import MOVES_IN, Contact, contact_options
from rigctl_drivers.scpi_family import SCPI

OPEN, CLOSED = "open", "closed"


class ScpiSwitch:
    """A shutter on a relay."""

    def __init__(self, link: Link, options: Options) -> None:
        self.capabilities = capabilities(options)
        self._at_rest: str = options["at rest"]
        self._contact = Contact(link, options, rests=self._at_rest == OPEN)

    def identify(self) -> Identity:
        """Ask who is there."""
        return self._contact.identify()

    def settings(self) -> Mapping[str, str | float]:
        """Read back the shutter's state; the rest is wiring."""
        return {"shutter": OPEN if self.is_open() else CLOSED, "at rest": self._at_rest}

    def begin_set(self, is_open: bool) -> Begun[bool]:
        """Start to open or close; yields the state read back."""
        return self._contact.begin_set(is_open)

    def is_open(self) -> bool:
        """Read the state back now."""
        return self._contact.state()


def capabilities(options: Options) -> ShutterCapabilities:
    """Return what the shutter can do, as the rig file describes it."""
    return ShutterCapabilities(moves_in_s=options[MOVES_IN])


DRIVER = Driver(
    name="scpi-switch",
    kind="shutter",
    family=SCPI,
    options={
        **contact_options(moves_in_s=20e-3),
        "at rest": Option(
            "choice",
            default=CLOSED,
            choices=(OPEN, CLOSED),
            meaning="what the shutter is while its relay is open",
        ),
    },
    capabilities=capabilities,
    open=ScpiSwitch,
    meaning="shutter on a relay of a switch unit that speaks SCPI",
)
