"""A relay contact of a switch unit that speaks SCPI, and what of two states stands behind it.

It owns the wire commands of a contact. What the two states are called is the driver's.
"""

from rigctl.interfaces import Begun, Identity, Option, Options
from rigctl.links.link import Link
from rigctl_drivers.reading import reading
from rigctl_drivers.scpi_codec import parse_bool
from rigctl_drivers.scpi_family import SCPI
from rigctl_drivers.scpi_shell import ask, identify, not_taken

CHANNEL, MOVES_IN = "channel", "moves in"
AGAIN_S = 0.05


class Contact:
    """A device of two states on a contact; a contact is closed when current flows through it.

    Parameters
    ----------
    options
        Those of `contact_options`.
    rests
        Its state while the contact is open.

    Source
    ------
    SCPI-1999 volume 2, ROUTe subsystem: `ROUTe:CLOSe`, `ROUTe:CLOSe?`, `ROUTe:OPEN`; from memory.
    """

    def __init__(self, link: Link, options: Options, *, rests: bool) -> None:
        self._link, self._rests = link, rests
        self._channels = f"(@{options[CHANNEL]})"
        self._moves_in_s: float = options[MOVES_IN]

    def identify(self) -> Identity:
        """Ask who is there."""
        return identify(self._link, kind="switch", probe=f"ROUTE:CLOSE? {self._channels}")

    def begin_set(self, state: bool) -> Begun[bool]:
        """Start to bring the device into a state; yields the state read back.

        Raises
        ------
        RefusedError
            The unit complains, or its contact reads back in the other state.
        """
        began_s = self._link.timeline.now()
        is_closed = state != self._rests
        header = "ROUTE:CLOSE" if is_closed else "ROUTE:OPEN"
        (text,) = ask(self._link, f"{header} {self._channels};:ROUTE:CLOSE? {self._channels}")
        if self._is_closed(text) != is_closed:
            asked, answer = ("closed", "open") if is_closed else ("open", "closed")
            raise not_taken(self._link, f"the relay {self._channels}", asked=asked, answer=answer)
        due_s = began_s + self._moves_in_s
        return Begun(due_s=due_s, poll=self.state, again_s=AGAIN_S, give_up_s=due_s + SCPI.longest_s)

    def state(self) -> bool:
        """Read the device's state back now."""
        (text,) = ask(self._link, f"ROUTE:CLOSE? {self._channels}")
        return self._is_closed(text) != self._rests

    def _is_closed(self, text: str) -> bool:
        with reading(self._link) as at:
            return parse_bool(text, address=at)


def contact_options(*, moves_in_s: float) -> dict[str, Option]:
    """Return the options that every device on a contact has."""
    return {
        CHANNEL: Option("whole number", default=1, meaning="number of the relay in its unit", sign="positive"),
        MOVES_IN: Option("time", default=moves_in_s, meaning="time from one state to the other"),
    }
