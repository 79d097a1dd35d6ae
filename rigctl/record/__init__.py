"""The run file: what is recorded, how it survives, and how it is read back.

The only part of polrig that knows HDF5; it is imported when a file is built or read, not before.
"""

from rigctl.record.layout import AxisLayout, Document, Header, StepLayout
from rigctl.record.load import load_run, verify_run
from rigctl.record.records import Dark, Visit, dwell_record
from rigctl.record.run import Run
from rigctl.record.run_writer import RunWriter, create_run
from rigctl.record.verify import Verification

__all__ = [
    "AxisLayout",
    "Dark",
    "Document",
    "Header",
    "Run",
    "RunWriter",
    "StepLayout",
    "Verification",
    "Visit",
    "create_run",
    "dwell_record",
    "load_run",
    "verify_run",
]
