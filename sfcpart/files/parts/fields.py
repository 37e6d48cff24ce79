"""Which fields of a mesh go into a file, under which names and as which numbers."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from sfcpart.dtypes import Array

__all__ = ["as_written", "file_dtype", "writable_fields"]

_INPUT_IDS = {"GlobalCellIds": "InputCellIds", "GlobalPointIds": "InputPointIds"}


def writable_fields(fields: Mapping[str, Array], reserved: frozenset[str]) -> dict[str, Array]:
    """Return the fields of real numbers by names that fit every file format.

    Names in `reserved` are left out (the writers put arrays of their own there), but global ids
    that the input carried stay as `InputCellIds` and `InputPointIds`, so that a split of a split
    still leads back to the first mesh. Fields of text, objects or complex numbers, which the
    formats cannot hold, are left out. A "/" in a name, which would open a group in HDF5, becomes
    "_"; of fields whose names then agree the last stays.

    Examples
    --------
    >>> list(writable_fields({"a/b": np.ones(2), "part": np.ones(2)}, frozenset({"part"})))
    ['a_b']
    """
    kept = {}
    for name, field in {**_input_ids(fields), **fields}.items():
        fitting = name.replace("/", "_").replace("\0", "_").strip(". ") or "field"
        if fitting not in reserved and np.asarray(field).dtype.kind in "biuf":
            kept[fitting] = np.asarray(field)
    return kept


def _input_ids(fields: Mapping[str, Array]) -> dict[str, Array]:
    """Return global ids of the input by the names under which they stay."""
    return {kept: fields[name] for name, kept in _INPUT_IDS.items() if name in fields}


def as_written(values: Array) -> Array:
    """Return rows of a field as a table of numbers that the file formats know."""
    if values.ndim > 2:
        values = values.reshape(len(values), int(np.prod(values.shape[1:])))
    return np.ascontiguousarray(values, file_dtype(values.dtype))


def file_dtype(dtype: np.dtype[np.generic]) -> np.dtype[np.generic]:
    """Return the nearest dtype of at most 8 bytes in the machine's byte order."""
    if dtype.kind == "b":
        return np.dtype(np.uint8)
    if dtype.kind == "f" and dtype.itemsize not in (4, 8):
        return np.dtype(np.float32 if dtype.itemsize < 4 else np.float64)
    return dtype.newbyteorder("=")
