"""Plain contacts of a switch unit that speaks SCPI: the driver `scpi-relay`."""

from collections.abc import Mapping

from rigctl.interfaces import Begun, Driver, Identity, Options, SwitchCapabilities
from rigctl.links.link import Link
from rigctl_drivers.contact import MOVES_IN, Contact, contact_options
from rigctl_drivers.scpi_family import SCPI


class ScpiRelay:
    """A contact for whatever the bench has it switch; open without power."""

    def __init__(self, link: Link, options: Options) -> None:
        self.capabilities = capabilities(options)
        self._contact = Contact(link, options, rests=False)

    def identify(self) -> Identity:
        """Ask who is there."""
        return self._contact.identify()

    def settings(self) -> Mapping[str, str | float]:
        """Read the contact's state back."""
        return {"contact": "closed" if self.is_closed() else "open"}

    def begin_set(self, is_closed: bool) -> Begun[bool]:
        """Start to close or open the contact; yields the state read back."""
        return self._contact.begin_set(is_closed)

    def is_closed(self) -> bool:
        """Read the state back now."""
        return self._contact.state()


def capabilities(options: Options) -> SwitchCapabilities:
    """Return what the relay can do, as the rig file describes it."""
    return SwitchCapabilities(moves_in_s=options[MOVES_IN])


DRIVER = Driver(
    name="scpi-relay",
    kind="relay",
    family=SCPI,
    options=contact_options(moves_in_s=10e-3),
    capabilities=capabilities,
    open=ScpiRelay,
    meaning="contact of a switch unit that speaks SCPI",
)
