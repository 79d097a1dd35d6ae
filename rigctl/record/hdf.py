"""Small pieces of an HDF5 file that every reader can open: groups, texts, notes, labelled arrays.

It owns the storage rules: text datasets are fixed-length ASCII (other encodings stop GNU Octave's loader),
longer or non-ASCII text is an array of bytes, the only filters are shuffle and gzip, and a dataset with
dimension scales has one path only.
"""

import hashlib
from collections.abc import Mapping
from typing import Any

import h5py
import numpy as np

from rigctl.record.names import free_names, plain_text
from rigctl.record.table import Table
from rigctl.record.variables import Variable

_COMPRESS_FROM = 4096
"""Bytes from which an array is stored in compressed chunks; below, a chunk's index outweighs the saving."""


def put_group(parent: Any, name: str, nx_class: str) -> Any:
    """Make a group of a NeXus class."""
    group = parent.create_group(name)
    group.attrs["NX_class"] = nx_class
    return group


def put_text(parent: Any, name: str, text: str) -> None:
    """Write a text where there is one; what ASCII cannot say stands in the attribute `text`."""
    if not text:
        return
    plain = plain_text(text)
    dataset = parent.create_dataset(name, data=np.bytes_(plain))
    if plain != text:
        dataset.attrs["text"] = _attribute(text)


def put_note(parent: Any, name: str, data: bytes, **texts: str) -> None:
    """Write bytes verbatim as an NXnote, with their SHA-256; nothing where there are none."""
    if not data:
        return
    note = put_group(parent, name, "NXnote")
    for key, text in texts.items():
        put_text(note, key, text)
    values = np.frombuffer(data, np.uint8)
    dataset = note.create_dataset("data", data=values, **_storage(values))
    dataset.attrs["sha256"] = hashlib.sha256(data).hexdigest()


def put_values(parent: Any, name: str, values: Mapping[str, Any]) -> Any:
    """Write named texts and numbers as a collection."""
    group = put_group(parent, name, "NXcollection")
    for key, item in zip(values, free_names(tuple(values)), strict=True):
        value = values[key]
        if isinstance(value, str):
            put_text(group, item, value)
        elif value is not None:
            group.create_dataset(item, data=np.int8(value) if isinstance(value, bool) else value)
        if item in group and item != key:
            group[item].attrs["name"] = _attribute(key)
    return group


def put_table(parent: Any, name: str, table: Table) -> Any:
    """Write a table as NXdata whose dimensions are named."""
    group = put_group(parent, name, "NXdata")
    group.attrs["signal"] = table.signals[0]
    if table.signals[1:]:
        group.attrs["auxiliary_signals"] = np.array(table.signals[1:], h5py.string_dtype())
    group.attrs["axes"] = np.array([axis.name for axis in table.axes], h5py.string_dtype())
    for place, axis in enumerate(table.axes):
        group.attrs[f"{axis.name}_indices"] = np.int32(place)
    for scale in (*table.axes, *table.scales):
        _put_variable(group, scale).make_scale(scale.name)
    for variable in table.variables:
        dataset = _put_variable(group, variable)
        for place, dim in enumerate(variable.dims):
            dataset.dims[place].attach_scale(group[dim])
    return group


def put_log(parent: Any, name: str, times: Variable, values: Variable) -> None:
    """Write values against their instants as NXlog."""
    group = put_group(parent, name, "NXlog")
    scale = _put_variable(group, times)
    scale.make_scale(times.name)
    _put_variable(group, values).dims[0].attach_scale(scale)


def _put_variable(group: Any, variable: Variable) -> Any:
    values = variable.values
    is_real = values.dtype.kind == "f"
    fill = {"fillvalue": np.nan} if is_real else {}
    dataset = group.create_dataset(variable.name, data=values, **fill, **_storage(values))
    dataset.attrs.update({key: _attribute(value) for key, value in variable.attributes.items()})
    if is_real and variable.dims != (variable.name,):
        dataset.attrs["_FillValue"] = np.array([np.nan])
    return dataset


def _attribute(value: Any) -> Any:
    """Return an attribute's value; a text of HDF5 ends at a NUL, and lone surrogates are no UTF-8."""
    return value.replace("\0", "?").encode("utf-8", "replace").decode() if isinstance(value, str) else value


def _storage(values: np.ndarray[Any, Any]) -> dict[str, Any]:
    if values.nbytes < _COMPRESS_FROM:
        return {}
    return {"chunks": True, "shuffle": True, "compression": "gzip", "compression_opts": 1}
