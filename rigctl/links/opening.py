"""The way to any address that people write: which channel reaches it.

It owns the choice. Each kind of channel is imported when it is first needed: VISA's import alone takes longer
than all the rest of a start.
"""

from rigctl.links.addresses import HislipAddress, SerialAddress, TcpAddress, parse_address
from rigctl.links.channel import Channel
from rigctl.links.family import Opening
from rigctl.timeline import Timeline


def open_channel(address: str, timeline: Timeline, opening: Opening) -> Channel:
    """Open the channel to an address, with the errors of that channel's construction.

    Parameters
    ----------
    opening
        What the instrument's family says of serial lines; the other ways have no use for it.
    """
    match parse_address(address):
        case TcpAddress():
            from rigctl.links.tcp import TcpChannel

            return TcpChannel(address, timeline)
        case SerialAddress():
            from rigctl.links.serial import SerialChannel

            return SerialChannel(address, timeline, opening)
        case HislipAddress():
            from rigctl.links.hislip import HislipChannel

            return HislipChannel(address, timeline)
        case _:
            from rigctl.links.visa import VisaChannel

            return VisaChannel(address, timeline)
