"""What the run file says about the instruments: who answered, how they were set, how they were calibrated.

It turns identity, settings and calibration records into one NeXus group a role.
"""

from collections.abc import Mapping
from typing import Any

from rigctl.record.conditions import said_roles
from rigctl.record.hdf import put_group, put_text, put_values
from rigctl.record.names import free_names
from rigctl.record.run import Run


def put_instrument(entry: Any, run: Run) -> None:
    """Write `/entry/instrument`: a group for each role that is set, read or was identified."""
    group = put_group(entry, "instrument", "NXinstrument")
    roles = tuple(dict.fromkeys([*_classes(run), *(record["role"] for record in run.of_kind("identity"))]))
    for role, name in zip(roles, free_names(roles), strict=True):
        _put_role(group, run, role, name)


def _classes(run: Run) -> dict[str, str]:
    moved = {axis.role: "NXpositioner" for step in run.header.steps for axis in step.axes if not axis.is_repeat}
    said = dict.fromkeys(said_roles(run), "NXsensor")
    return moved | said | dict.fromkeys(run.header.detectors, "NXdetector")


def _put_role(parent: Any, run: Run, role: str, name: str) -> None:
    group = put_group(parent, name, _classes(run).get(role, "NXcollection"))
    identities = [record for record in run.of_kind("identity") if record["role"] == role]
    instrument = identities[-1]["instrument"] if identities else ""
    put_text(group, "description", f"{role}: {instrument}" if instrument else role)
    if identities:
        _put_fabrication(group, identities[-1]["identity"])
        put_values(group, "identity", identities[-1]["identity"])
    for kind in ("settings", "calibration"):
        values = _values(run, kind, instrument)
        if values:
            put_values(group, kind, values)


def _put_fabrication(parent: Any, identity: Mapping[str, str]) -> None:
    fabrication = put_group(parent, "fabrication", "NXfabrication")
    for item, key in (("vendor", "maker"), ("model", "model"), ("serial_number", "serial")):
        put_text(fabrication, item, identity[key])


def _values(run: Run, kind: str, instrument: str) -> Mapping[str, Any]:
    """What was said last about an instrument."""
    said: dict[str, Any] = {}
    for record in run.of_kind(kind):
        if record["instrument"] == instrument:
            said |= record["values"]
    return said
