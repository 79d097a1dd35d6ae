"""A digest over everything a run file held when it was closed, so that a change can be found and named.

Each group and dataset has one of its own, over its type, shape, values and attributes; references between
datasets (dimension scales) are left out because they are addresses, and so are the root's attributes that
name libraries. It finds accidents and honest edits; it is no signature, since anybody can work it out again.
"""

import hashlib
import json
from collections.abc import Iterator
from typing import Any

import h5py
import numpy as np

DIGEST = "/entry/acquisition/digest"
_REFERENCES = {"REFERENCE_LIST", "DIMENSION_LIST"}
_LIBRARIES = {"HDF5_Version", "h5py_version", "file_time", "file_update_time"}


def put_digest(file: Any) -> None:
    """Store the digest of every object in the file."""
    text = json.dumps(digests(file), indent=0, sort_keys=True)
    note = file.create_group(DIGEST)
    note.attrs["NX_class"] = "NXnote"
    note.create_dataset("type", data=np.bytes_(b"application/json"))
    data = note.create_dataset("data", data=np.frombuffer(text.encode(), np.uint8))
    data.attrs["sha256"] = hashlib.sha256(text.encode()).hexdigest()


def stored_digests(file: Any) -> dict[str, str] | None:
    """Return the digests stored at close, by path; None when the file was never closed.

    Raises `ValueError` when the list of digests has itself changed.
    """
    if DIGEST not in file:
        return None
    data = file[f"{DIGEST}/data"]
    text = bytes(data[()])
    if hashlib.sha256(text).hexdigest() != data.attrs["sha256"]:
        raise ValueError(DIGEST)
    values: dict[str, str] = json.loads(text)
    return values


def digests(file: Any) -> dict[str, str]:
    """Return the digest of each object, by path; `unreadable` where the library cannot read it."""
    return {path: _digest(item) for path, item in _walk(file) if path != DIGEST and not path.startswith(f"{DIGEST}/")}


def _walk(group: Any) -> Iterator[tuple[str, Any]]:
    yield group.name, group
    for name in sorted(group):
        item = group[name]
        if isinstance(item, h5py.Group):
            yield from _walk(item)
        else:
            yield item.name, item


def _digest(item: Any) -> str:
    digest = hashlib.sha256()
    try:
        for part in _parts(item):
            digest.update(part)
    except (OSError, RuntimeError):
        return "unreadable"
    return digest.hexdigest()


def _parts(item: Any) -> Iterator[bytes]:
    if isinstance(item, h5py.Dataset):
        yield _signature(item[()])
    for name in sorted(set(item.attrs) - _REFERENCES - _LIBRARIES):
        yield name.encode()
        yield _signature(item.attrs[name])


def _signature(value: Any) -> bytes:
    array = np.asarray(value)
    if array.dtype.kind in "OU":
        return json.dumps(array.tolist()).encode()
    return f"{array.dtype.str}{array.shape}".encode() + array.tobytes()
