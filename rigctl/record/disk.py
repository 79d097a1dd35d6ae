"""Putting a finished file in its place: a crash leaves the old one or the new one, never half of one."""

import os
from pathlib import Path


def sync_file(path: Path) -> None:
    """Force a closed file to the disk."""
    _sync(path, os.O_RDWR)


def sync_directory(path: Path) -> None:
    """Force the names in a directory to the disk."""
    _sync(path, os.O_RDONLY)


def replace_durably(new: Path, path: Path) -> None:
    """Put a complete file in the place of another in one step that survives a power cut."""
    sync_file(new)
    os.replace(new, path)
    sync_directory(path.parent)


def remove_durably(path: Path) -> None:
    """Take a name away for good."""
    path.unlink()
    sync_directory(path.parent)


def _sync(path: Path, how: int) -> None:
    fd = os.open(path, how)
    try:
        os.fsync(fd)
    finally:
        os.close(fd)
