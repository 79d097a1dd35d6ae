"""From a rig file to a checked `Rig`.

It owns the order of the checks and the way from what is written to what is meant.
"""

from collections.abc import Mapping
from pathlib import Path

from rigctl.files.document import Document, parse_document, read_document
from rigctl.files.mistakes import Mistakes
from rigctl.files.part import Part
from rigctl.files.rig import Calibration, Diode, InstrumentEntry, Rig, Room, SimulatedSection
from rigctl.files.rig_references import Extras, read_extras
from rigctl.files.shape import shaped
from rigctl.files.written_rig import WrittenCalibration, WrittenDiode, WrittenInstrument, WrittenRig
from rigctl.interfaces import BenchFactory, Driver


def load_rig(path: Path, drivers: Mapping[str, Driver], bench: BenchFactory | None) -> Rig:
    """Read a rig file; raises `FileError` with every mistake of it.

    `drivers` are those installed, by name. Without a `bench` its keys under `simulated` are not looked at.
    """
    mistakes = Mistakes(str(path))
    return _rig(read_document(path, mistakes), mistakes, drivers, bench)


def parse_rig(text: str, path_name: str, drivers: Mapping[str, Driver], bench: BenchFactory | None) -> Rig:
    """Read a rig from a text that is not in a file of its own, such as a bench's default."""
    mistakes = Mistakes(path_name)
    return _rig(parse_document(text, mistakes), mistakes, drivers, bench)


def _rig(document: Document, mistakes: Mistakes, drivers: Mapping[str, Driver], bench: BenchFactory | None) -> Rig:
    """Check a document and make a rig of it."""
    written = shaped(WrittenRig, document, mistakes, context={})
    extras = read_extras(Part.whole(document, mistakes), drivers, bench)
    mistakes.raise_if_any()
    if written is None:
        mistakes.refuse("is no rig file")
    return Rig(
        title=written.rig,
        instruments={name: _entry(name, part, extras) for name, part in written.instruments.items()},
        diodes={name: _diode(name, part) for name, part in written.diodes.items()},
        roles=dict(written.roles),
        on_stop=dict(written.on_stop),
        room=None if written.room is None else Room(written.room.humidity, written.room.temperature),
        simulated=SimulatedSection(written.simulated.seed, extras.bench, extras.twins),
        text=document.text,
        path=document.path,
        sha256=document.sha256,
        places=document.places,
    )


def _entry(name: str, written: WrittenInstrument, extras: Extras) -> InstrumentEntry:
    limits = {} if written.limits is None else written.limits.model_dump(exclude_none=True)
    calibration = None if written.calibration is None else _calibration(written.calibration)
    return InstrumentEntry(name, written.driver, written.at, extras.options[name], limits, calibration)


def _diode(name: str, written: WrittenDiode) -> Diode:
    limits = written.limits
    return Diode(
        name,
        written.on,
        limits.current,
        limits.power,
        limits.compliance,
        limits.temperature,
        label_class=written.class_on_label,
    )


def _calibration(written: WrittenCalibration) -> Calibration:
    return Calibration(written.certificate, written.due, written.expanded_uncertainty, written.coverage_factor)
