"""The run file's content, built whole in memory from a run: NeXus groups that xarray and netCDF open too.

It owns which group holds what. Nothing in it depends on the clock or on chance: the same records give the
same bytes.

Source
------
NeXus definitions 2026.01: NXroot, NXentry, NXdata, NXinstrument, NXpositioner, NXsensor, NXdetector, NXlog,
NXprocess, NXnote.
"""

from datetime import timedelta
from typing import Any

import h5py

from rigctl.record.digest import put_digest
from rigctl.record.environment import put_environment
from rigctl.record.hdf import put_group, put_note, put_table, put_text
from rigctl.record.instrument import put_instrument
from rigctl.record.names import free_names
from rigctl.record.run import Run
from rigctl.record.table import dark_table, step_table

PROGRAM = "polrig"
JOURNAL = "/entry/acquisition/journal/data"
RESERVED = (
    *(
        "title",
        "start_time",
        "end_time",
        "entry_identifier_uuid",
        "program_name",
        "duration",
        "user",
        "sample",
    ),
    *("instrument", "acquisition", "environment", "darks"),
)


def view_image(run: Run, journal: bytes, *, tail: bytes, is_final: bool) -> bytes:
    """Return the bytes of the run file.

    Parameters
    ----------
    run
        What was recorded.
    journal, tail
        The journal's whole records, kept verbatim, and what a crash left behind them.
    is_final
        Whether it gets the digest that `verify` compares with.
    """
    with h5py.File("view", "w", driver="core", backing_store=False, libver=("earliest", "v110")) as file:
        _put_root(file, run)
        entry = put_group(file, "entry", "NXentry")
        _put_entry(entry, run)
        for step, name in zip(run.header.steps, step_groups(run), strict=True):
            put_table(entry, name, step_table(run, step.name)).attrs["title"] = step.name
        if run.darks:
            put_table(entry, "darks", dark_table(run))
        put_instrument(entry, run)
        _put_acquisition(entry, run, journal, tail)
        put_environment(entry, run)
        if is_final:
            put_digest(file)
        file.flush()
        return bytes(file.id.get_file_image())


def step_groups(run: Run) -> tuple[str, ...]:
    """Return the group name of each step."""
    return free_names([step.name for step in run.header.steps], taken=RESERVED)


def _put_root(file: Any, run: Run) -> None:
    file.attrs["NX_class"] = "NXroot"
    file.attrs["default"] = "entry"
    file.attrs["file_time"] = _instant(run, run.duration_s)
    # NXroot allows no attribute of ours, and its `creator` is what a reader looks at first
    file.attrs["creator"] = f"{PROGRAM} (simulated bench)" if run.header.is_simulated else PROGRAM
    file.attrs["HDF5_Version"] = h5py.version.hdf5_version
    file.attrs["h5py_version"] = h5py.version.version


def _put_entry(entry: Any, run: Run) -> None:
    header = run.header
    entry.attrs["default"] = step_groups(run)[0]
    put_text(entry, "title", header.title)
    put_text(entry, "start_time", _instant(run, 0.0))
    put_text(entry, "end_time", _instant(run, run.duration_s))
    put_text(entry, "entry_identifier_uuid", header.uuid)
    put_text(entry, "program_name", PROGRAM)
    entry["program_name"].attrs["version"] = header.versions.get(PROGRAM, "")
    entry.create_dataset("duration", data=round(run.duration_s)).attrs["units"] = "s"
    if header.operator:
        put_text(put_group(entry, "user", "NXuser"), "name", header.operator)
    if header.part:
        put_text(put_group(entry, "sample", "NXsample"), "name", header.part)


def _put_acquisition(entry: Any, run: Run, journal: bytes, tail: bytes) -> None:
    process = put_group(entry, "acquisition", "NXprocess")
    put_text(process, "program", PROGRAM)
    put_text(process, "version", run.header.versions.get(PROGRAM, ""))
    put_text(process, "date", _instant(run, 0.0))
    for name in ("recipe", "rig"):
        document = getattr(run.header, name)
        put_note(process, name, document.text.encode(), type="application/yaml", file_name=document.file_name)
    events = "".join(f"{e['t']:.3f} s {e['level']}: {e['text']}\n" for e in run.of_kind("event"))
    put_note(process, "events", events.encode("utf-8", "replace"), type="text/plain")
    put_note(
        process,
        "journal",
        journal,
        type="text/plain",
        description="every record and attempt, in the order of time",
    )
    put_note(
        process,
        "journal_tail",
        tail,
        type="application/octet-stream",
        description="torn by a crash, not used",
    )


def _instant(run: Run, instant_s: float) -> str:
    return (run.header.start + timedelta(seconds=instant_s)).isoformat()
