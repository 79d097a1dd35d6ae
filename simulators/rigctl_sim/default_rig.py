"""The rig file of a bench that nobody wrote one for: a well-behaved instrument for each role.

It owns the text only; the rig file's reader checks it like any other.
"""

import json
from collections.abc import Mapping

from rigctl.interfaces import RoleKind

FIRST_PORT = 5001
_DRIVERS: Mapping[RoleKind, str] = {
    "rotation stage": "gcode-rotary",
    "power meter": "scpi-power-meter",
    "shutter": "scpi-switch",
}
_EXTRA: Mapping[RoleKind, str] = {
    "rotation stage": ", positive: counter-clockwise to an eye facing the light",
    "power meter": "",
    "shutter": ", channel: 1, at rest: closed",
}


def default_rig(roles: Mapping[str, RoleKind]) -> str:
    """Write a rig file with an instrument of its own for each role."""
    lines = ["rig: simulated bench", "instruments:" if roles else "instruments: {}"]
    for number, (role, kind) in enumerate(roles.items()):
        at = f"tcp://127.0.0.1:{FIRST_PORT + number}"
        lines.append(f"  {_name(role)}: {{driver: {_DRIVERS[kind]}, at: {json.dumps(at)}{_EXTRA[kind]}}}")
    lines.append("roles:" if roles else "roles: {}")
    lines.extend(f"  {json.dumps(role)}: {_name(role)}" for role in roles)
    return "\n".join(lines) + "\n"


def _name(role: str) -> str:
    """Name the instrument after its role; quoted as JSON, which YAML reads alike."""
    return json.dumps(f"simulated {role}")
