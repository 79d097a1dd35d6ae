"""Addresses as people write them in a rig file.

It owns their grammar; it looks nothing up and opens nothing.
"""

import re
from dataclasses import dataclass

from rigctl.errors import PlanError

_TCP = re.compile(r"tcp://(?:\[(?P<six>[0-9a-f:.]+)\]|(?P<host>[^\s\[\]/:@?#]+)):(?P<port>[0-9]{1,5})", re.I)


@dataclass(frozen=True, slots=True)
class TcpAddress:
    """A port of a host; an IPv6 host stands without its brackets."""

    host: str
    port: int

    def __str__(self) -> str:
        host = f"[{self.host}]" if ":" in self.host else self.host
        return f"tcp://{host}:{self.port}"


Address = TcpAddress


def parse_address(text: str) -> Address:
    """Read an address; two spellings of one address become equal. `PlanError` when it is none."""
    found = _TCP.fullmatch(text)
    if found is None:
        raise PlanError(_what_is_wrong(text), do="write tcp://host:port, such as tcp://10.0.0.7:5025")
    port = int(found["port"])
    if not 1 <= port <= 65535:
        raise PlanError(f"'{text}' names port {port}", do="a port is a whole number from 1 to 65535")
    return TcpAddress((found["six"] or found["host"]).lower(), port)


def _what_is_wrong(text: str) -> str:
    scheme, separator, _ = text.partition("://")
    if separator and scheme.lower() != "tcp":
        return f"'{text}': this version reaches no instruments by '{scheme}'"
    return f"'{text}' is no address"
