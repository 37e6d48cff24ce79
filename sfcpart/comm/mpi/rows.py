"""Rows of arrays as MPI datatypes, and what both ends must agree on."""

from __future__ import annotations

import zlib
from collections.abc import Iterator
from contextlib import contextmanager

import numpy as np
from mpi4py import MPI

from sfcpart.comm.gate import row_form
from sfcpart.dtypes import Array, Int64Array
from sfcpart.errors import RankError

__all__ = ["as_bytes", "committed_row", "counts_of", "fingerprint", "row_type"]


def committed_row(array: Array) -> MPI.Datatype:
    """Make the MPI datatype of one row of an array; it must be freed."""
    n_bytes = array.dtype.itemsize * int(np.prod(array.shape[1:], dtype=np.int64))
    return MPI.BYTE.Create_contiguous(n_bytes).Commit()


@contextmanager
def row_type(array: Array) -> Iterator[MPI.Datatype]:
    """Make the MPI datatype of one row of an array."""
    row = committed_row(array)
    try:
        yield row
    finally:
        row.Free()


def as_bytes(array: Array) -> Array:
    """View a contiguous array as bytes."""
    return array.reshape(-1).view(np.uint8)


def fingerprint(array: Array) -> int:
    """Hash the dtype and trailing shape, to tell when ranks disagree about them."""
    return zlib.crc32(row_form(array).encode())


def counts_of(heads: Int64Array, array: Array) -> Int64Array:
    """Return the row counts in `heads`; an error on all ranks if some rank's rows differ."""
    if np.any(heads[:, 1] != heads[0, 1]):
        raise RankError(
            f"ranks exchange rows of different form (this one {row_form(array)}); "
            "wanted one dtype and trailing shape"
        )
    return heads[:, 0].copy()
