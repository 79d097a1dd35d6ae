"""What a run file says before its first record: the header, its steps and their axes.

It owns the header's dataclasses and their form as a journal record; it reads and writes no file.
"""

import hashlib
from collections import Counter
from collections.abc import Mapping, Sequence
from dataclasses import asdict, dataclass, field
from datetime import datetime
from typing import Any

from rigctl.errors import RecordError


@dataclass(frozen=True, slots=True)
class Document:
    """A file that a person wrote, verbatim; `sha256` is the hexadecimal digest of its UTF-8 bytes."""

    text: str
    file_name: str
    sha256: str

    @classmethod
    def of(cls, text: str, file_name: str) -> "Document":
        """Return a document with its digest worked out."""
        return cls(text, file_name, hashlib.sha256(text.encode()).hexdigest())


REPEAT = "repeat"
"""Stands for a role on an axis that sets nothing and only counts."""


@dataclass(frozen=True, slots=True)
class AxisLayout:
    """One dimension of a step: the role that is set and the values asked for, in `units`."""

    name: str
    role: str
    units: str
    values: tuple[float, ...]

    @property
    def is_repeat(self) -> bool:
        """Whether it only counts."""
        return self.role == REPEAT


@dataclass(frozen=True, slots=True)
class StepLayout:
    """One step: a rectangular grid, the slowest axis first."""

    name: str
    axes: tuple[AxisLayout, ...]

    @property
    def shape(self) -> tuple[int, ...]:
        """Number of values of each axis."""
        return tuple(len(axis.values) for axis in self.axes)


@dataclass(frozen=True, slots=True)
class Header:
    """Everything that is known before the first instrument is touched.

    `truth` is the hidden truth of a rehearsal by quantity, each in the base unit of its kind; it is empty on
    hardware. `detectors` are role names, the principal one first; `monitor` is the one of them that watches the
    source's power, where there is one. `start` bears its offset from UTC.
    """

    uuid: str
    start: datetime
    title: str
    recipe: Document
    rig: Document
    steps: tuple[StepLayout, ...]
    detectors: tuple[str, ...]
    versions: Mapping[str, str] = field(default_factory=dict)
    is_simulated: bool = False
    seed: int | None = None
    truth: Mapping[str, float] = field(default_factory=dict)
    operator: str = ""
    part: str = ""
    monitor: str = ""

    def step(self, name: str) -> StepLayout:
        """Return the step of a name; `RecordError` when there is none."""
        for step in self.steps:
            if step.name == name:
                return step
        raise RecordError(f"there is no step '{name}'", do=f"steps: {', '.join(s.name for s in self.steps)}")

    def to_record(self) -> dict[str, Any]:
        """Return the header as the first record of a journal."""
        return {"kind": "header", **asdict(self), "start": self.start.isoformat()}

    @classmethod
    def from_record(cls, record: Mapping[str, Any]) -> "Header":
        """Return the header that `to_record` was made of."""
        values = {key: value for key, value in record.items() if key != "kind"}
        values["start"] = datetime.fromisoformat(record["start"])
        values["recipe"], values["rig"] = Document(**record["recipe"]), Document(**record["rig"])
        values["steps"] = tuple(_step(step) for step in record["steps"])
        values["detectors"] = tuple(record["detectors"])
        return cls(**values)


def check_header(header: Header) -> None:
    """Raise `RecordError` for a header that no file can hold.

    It must have an offset from UTC, at least one step and one detector, at least one value on every axis, no
    name twice, and its monitor must be one of several detectors.
    """
    if header.start.tzinfo is None:
        raise RecordError("the start time has no offset from UTC")
    if not header.steps or not header.detectors:
        raise RecordError("a run needs at least one step and one detector")
    if header.monitor and (header.monitor not in header.detectors or len(header.detectors) == 1):
        raise RecordError(f"the monitor '{header.monitor}' is none of several detectors")
    _refuse_twice("step", [step.name for step in header.steps])
    _refuse_twice("detector", header.detectors)
    for step in header.steps:
        _refuse_twice(f"axis of step '{step.name}'", [axis.name for axis in step.axes])
        if not step.axes or 0 in step.shape:
            raise RecordError(f"step '{step.name}' has no visit")


def _step(record: Mapping[str, Any]) -> StepLayout:
    axes = (AxisLayout(**{**axis, "values": tuple(axis["values"])}) for axis in record["axes"])
    return StepLayout(record["name"], tuple(axes))


def _refuse_twice(what: str, names: Sequence[str]) -> None:
    for name, count in Counter(names).items():
        if count > 1:
            raise RecordError(f"two of one name: {what} '{name}'", do="give each a name of its own")
