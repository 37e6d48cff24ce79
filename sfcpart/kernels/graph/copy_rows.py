"""Rows of a CSR relation in another order; data-parallel over the new rows."""

from __future__ import annotations

from sfcpart.dtypes import Array
from sfcpart.kernels._jit import jit

__all__ = ["copy_rows"]


@jit
def copy_rows(
    start: int, stop: int, rows: Array, old_ptr: Array, old: Array, new_ptr: Array, new: Array
) -> None:
    """Write the entries of the old rows `rows[start:stop]` to the new rows `start:stop`."""
    for i in range(start, stop):
        shift = old_ptr[rows[i]] - new_ptr[i]
        for j in range(new_ptr[i], new_ptr[i + 1]):
            new[j] = old[j + shift]
