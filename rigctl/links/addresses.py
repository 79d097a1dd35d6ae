"""Addresses as people write them in a rig file.

It owns their grammar; it looks nothing up and opens nothing. Of VISA's resources it knows those of instruments
(INSTR), and sends people elsewhere with plain sockets and serial ports, which need no VISA.
"""

import posixpath
import re
from dataclasses import dataclass

from rigctl.errors import QuantityError

HISLIP_PORT = 4880
"""The port registered for HiSLIP. Source: IVI-6.1."""

_HOST = r"(?P<host>[^\s\[\]/:@?#,]+)"
_ID = r"0x[0-9a-f]{1,4}|[0-9]{1,5}"
_TCP = re.compile(rf"tcp://(?:\[(?P<six>[0-9a-f:.]+)\]|{_HOST}):(?P<port>[0-9]{{1,5}})", re.I)
_SERIAL = re.compile(r"serial://(?P<path>/[^\s?#]+)(?:\?(?P<query>[^\s?#]*))?", re.I)
_LAN = re.compile(
    rf"TCPIP[0-9]*::{_HOST}(?:::(?!INSTR)(?P<device>[a-z0-9_]+)(?:,(?P<port>[0-9]{{1,5}}))?)?(?:::INSTR)?", re.I
)
_GPIB = re.compile(r"GPIB(?P<board>[0-9]*)::(?P<first>[0-9]{1,2})(?:::(?P<second>[0-9]{1,2}))?(?:::INSTR)?", re.I)
_USB = re.compile(
    rf"USB(?P<board>[0-9]*)::(?P<maker>{_ID})::(?P<model>{_ID})::(?!INSTR)(?P<serial>[^\s:]+)"
    r"(?:::(?P<interface>[0-9]{1,3}))?(?:::INSTR)?",
    re.I,
)

_EXPECTED = {
    "tcp": "tcp://host:port, the port from 1 to 65535",
    "serial": "serial:///path?baud=rate, such as serial:///dev/ttyUSB0?baud=115200, and &format=8E1 if it is not 8N1",
    "visa": "visa:// and an instrument's resource, such as visa://TCPIP0::10.0.0.9::hislip0::INSTR",
}
_ANY = "tcp://host:port, serial:///path?baud=rate or visa://resource"


@dataclass(frozen=True, slots=True)
class TcpAddress:
    """A port of a host; an IPv6 host stands without its brackets."""

    host: str
    port: int

    def __str__(self) -> str:
        host = f"[{self.host}]" if ":" in self.host else self.host
        return f"tcp://{host}:{self.port}"


@dataclass(frozen=True, slots=True)
class SerialAddress:
    """A serial port; `format` is data bits, parity (none, even or odd) and stop bits."""

    path: str
    baud: int
    format: str = "8N1"

    def __str__(self) -> str:
        format_ = "" if self.format == "8N1" else f"&format={self.format}"
        return f"serial://{self.path}?baud={self.baud}{format_}"

    @property
    def byte_s(self) -> float:
        """How long one byte takes on the wire, with its start, parity and stop bits, s."""
        data, has_parity, stop = int(self.format[0]), self.format[1] != "N", int(self.format[2])
        return (1 + data + has_parity + stop) / self.baud


@dataclass(frozen=True, slots=True)
class HislipAddress:
    """An instrument that speaks HiSLIP over the network; written as a VISA resource."""

    host: str
    device: str
    port: int = HISLIP_PORT

    def __str__(self) -> str:
        port = "" if self.port == HISLIP_PORT else f",{self.port}"
        return f"visa://TCPIP0::{self.host}::{self.device}{port}::INSTR"


@dataclass(frozen=True, slots=True)
class VisaAddress:
    """An instrument's resource of any other kind: VXI-11, GPIB or USBTMC."""

    resource: str

    def __str__(self) -> str:
        return f"visa://{self.resource}"


Address = TcpAddress | SerialAddress | HislipAddress | VisaAddress


def parse_address(text: str) -> Address:
    """Read an address; two spellings of one address become equal. `QuantityError` when it is none."""
    scheme, separator, rest = text.partition("://")
    match scheme.lower() if separator else "":
        case "tcp":
            return _tcp(text)
        case "serial":
            return _serial(text)
        case "visa":
            return _visa(text, rest)
        case "":
            raise QuantityError(f"'{text}' is no address", expected=_ANY)
        case _:
            what = f"'{text}': this version reaches no instruments by '{scheme}'"
            raise QuantityError(what, expected=_ANY)


def _tcp(text: str) -> TcpAddress:
    found = _TCP.fullmatch(text)
    if found is None:
        raise _no_address(text, "tcp")
    return TcpAddress((found["six"] or found["host"]).lower(), _port(text, found["port"]))


def _serial(text: str) -> SerialAddress:
    found = _SERIAL.fullmatch(text)
    if found is None:
        raise _no_address(text, "serial")
    asked = [item.partition("=") for item in (found["query"] or "").split("&")]
    settings = {name.lower(): value for name, _, value in asked}
    baud, format_ = settings.pop("baud", ""), settings.pop("format", "8N1").upper()
    if not re.fullmatch(r"[0-9]{2,7}", baud, re.A) or int(baud) < 50:
        raise QuantityError(f"'{text}' does not say how fast the line is", expected=_EXPECTED["serial"])
    if settings or len(asked) > 2 or not re.fullmatch("[78][NEO][12]", format_):
        raise _no_address(text, "serial")
    return SerialAddress(posixpath.normpath("/" + found["path"].lstrip("/")), int(baud), format_)


def _visa(text: str, resource: str) -> HislipAddress | VisaAddress:
    """Read a resource; its class may be left out, and then is INSTR, as VISA has it."""
    if found := _LAN.fullmatch(resource):
        return _lan(text, found)
    if found := _GPIB.fullmatch(resource):
        numbers = [int(number) for number in (found["first"], found["second"]) if number]
        if max(numbers) <= 30:  # IEEE 488.1: primary addresses; VISA counts secondary ones from 0 as well
            return _resource("GPIB", found["board"], *numbers)
    if found := _USB.fullmatch(resource):
        ids = [f"0x{int(number, 0):04X}" for number in (found["maker"], found["model"])]
        interface = [int(found["interface"])] if found["interface"] else []
        return _resource("USB", found["board"], *ids, found["serial"], *interface)
    if re.fullmatch(r"TCPIP.*::SOCKET", resource, re.I):
        raise QuantityError(f"'{text}' is a plain socket, which needs no VISA", expected=_EXPECTED["tcp"])
    if re.match(r"ASRL", resource, re.I):
        raise QuantityError(f"'{text}' is a serial port, which needs no VISA", expected=_EXPECTED["serial"])
    raise _no_address(text, "visa")


def _lan(text: str, found: re.Match[str]) -> HislipAddress | VisaAddress:
    host, device = found["host"].lower(), (found["device"] or "inst0").lower()
    if device.startswith("hislip"):
        return HislipAddress(host, device, _port(text, found["port"] or str(HISLIP_PORT)))
    if found["port"]:  # VXI-11 asks the host's port mapper
        raise _no_address(text, "visa")
    return _resource("TCPIP", "0", host, device)


def _resource(bus: str, board: str, *parts: str | int) -> VisaAddress:
    return VisaAddress("::".join([f"{bus}{int(board or 0)}", *map(str, parts), "INSTR"]))


def _port(text: str, digits: str) -> int:
    port = int(digits)
    if not 1 <= port <= 65535:
        raise QuantityError(f"'{text}' names port {port}", expected=_EXPECTED["tcp"])
    return port


def _no_address(text: str, scheme: str) -> QuantityError:
    return QuantityError(f"'{text}' is no address", expected=_EXPECTED[scheme])
