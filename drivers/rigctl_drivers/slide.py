"""Slides on a relay of a switch unit that speaks SCPI: the driver `scpi-slide`.

It owns which state of the relay has the element in the beam.
"""

from collections.abc import Mapping

from rigctl.interfaces import Begun, Driver, Identity, Option, Options, SwitchCapabilities
from rigctl.links.link import Link
from rigctl_drivers.contact import MOVES_IN, Contact, contact_options
from rigctl_drivers.scpi_family import SCPI

IN, OUT = "in", "out"


class ScpiSlide:
    """A slide on a relay."""

    def __init__(self, link: Link, options: Options) -> None:
        self.capabilities = capabilities(options)
        self._at_rest: str = options["at rest"]
        self._contact = Contact(link, options, rests=self._at_rest == IN)

    def identify(self) -> Identity:
        """Ask who is there."""
        return self._contact.identify()

    def settings(self) -> Mapping[str, str | float]:
        """Read back where the element is; the rest is wiring."""
        return {"element": IN if self.is_in() else OUT, "at rest": self._at_rest}

    def begin_set(self, is_in: bool) -> Begun[bool]:
        """Start to put the element in or out; yields whether it is in, as read back."""
        return self._contact.begin_set(is_in)

    def is_in(self) -> bool:
        """Read the state back now."""
        return self._contact.state()


def capabilities(options: Options) -> SwitchCapabilities:
    """Return what the slide can do, as the rig file describes it."""
    return SwitchCapabilities(moves_in_s=options[MOVES_IN])


DRIVER = Driver(
    name="scpi-slide",
    kind="slide",
    family=SCPI,
    options={
        **contact_options(moves_in_s=0.5),
        "at rest": Option(
            "choice",
            default=IN,
            choices=(IN, OUT),
            meaning="where the element is while its relay is open",
        ),
    },
    capabilities=capabilities,
    open=ScpiSlide,
    meaning="slide with an optical element, on a relay of a switch unit that speaks SCPI",
)
