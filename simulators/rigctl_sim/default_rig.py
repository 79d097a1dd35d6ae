"""The rig file of a bench that nobody wrote one for: a well-behaved instrument for each role.

It owns the text only; the rig file's reader checks it like any other.
"""

import json
from collections.abc import Mapping

from rigctl.interfaces import RoleKind

FIRST_PORT = 5001
_DRIVERS: Mapping[RoleKind, str] = {
    "rotation stage": "gcode-rotary, positive: counter-clockwise to an eye facing the light",
    "power meter": "scpi-power-meter",
    "shutter": "scpi-switch, channel: 1, at rest: closed",
    "slide": "scpi-slide, channel: 1, at rest: in",
    "relay": "scpi-relay, channel: 1",
    "current source": "scpi-current-source, largest current: 200 mA, largest compliance: 5 V",
    "temperature controller": 'scpi-temperature-controller, thermistor: "beta 3976 K, 10 kOhm at 25 degC"',
}
_DIODE = "limits: {current: 100 mA, compliance: 3 V, temperature: 5 degC to 50 degC}, class on label: 3B"
_SHARED_NOISE = "0.04 %"
"""Of the 0.05 % that a head declares: with heads alike, most of it is the source's; common practice."""


def default_rig(roles: Mapping[str, RoleKind]) -> str:
    """Write a rig file with an instrument of its own for each role, and a diode on each current source."""
    lines = ["rig: simulated bench", "instruments:"]
    for number, (role, kind) in enumerate(roles.items()):
        at = f"tcp://127.0.0.1:{FIRST_PORT + number}"
        lines.append(f"  {_name(role)}: {{driver: {_DRIVERS[kind]}, at: {json.dumps(at)}}}")
    sources = [role for role, kind in roles.items() if kind == "current source"]
    lines.extend(["diodes:"] if sources else [])
    lines.extend(f"  {json.dumps(f'diode of {role}')}: {{on: {_name(role)}, {_DIODE}}}" for role in sources)
    lines.append("roles:")
    lines.extend(f"  {json.dumps(role)}: {_name(role)}" for role in roles)
    if sum(kind == "power meter" for kind in roles.values()) > 1:
        lines.append(f"simulated: {{source noise: {_SHARED_NOISE}}}")
    return "\n".join(lines) + "\n"


def _name(role: str) -> str:
    """Name the instrument after its role; quoted as JSON, which YAML reads alike."""
    return json.dumps(f"simulated {role}")
