"""A binary max-heap of vertices whose keys may change: `heap` holds vertices, `spot` their places.

`key[v]` orders, `spot[v]` is the place of v in `heap` or negative. Equal keys keep the order
that the (serial) sequence of calls gives them.
"""

from __future__ import annotations

from sfcpart.dtypes import Array
from sfcpart.kernels._jit import jit

__all__ = ["drop", "put", "sift_down", "sift_up"]


@jit
def sift_up(heap: Array, spot: Array, key: Array, i: int) -> None:
    """Move the vertex at place i towards the top until its parent is no smaller."""
    v = heap[i]
    key_v = key[v]
    while i > 0:
        up = (i - 1) >> 1
        u = heap[up]
        if key[u] >= key_v:
            break
        heap[i] = u
        spot[u] = i
        i = up
    heap[i] = v
    spot[v] = i


@jit
def sift_down(heap: Array, spot: Array, key: Array, i: int, size: int) -> None:
    """Move the vertex at place i away from the top until no child is larger."""
    v = heap[i]
    key_v = key[v]
    while True:
        down = 2 * i + 1
        if down >= size:
            break
        if down + 1 < size and key[heap[down + 1]] > key[heap[down]]:
            down += 1
        u = heap[down]
        if key[u] <= key_v:
            break
        heap[i] = u
        spot[u] = i
        i = down
    heap[i] = v
    spot[v] = i


@jit
def put(heap: Array, spot: Array, key: Array, v: int, new_key: int, size: int) -> int:
    """Insert v, or change its key; return the new size."""
    i = spot[v]
    if i < 0:
        key[v] = new_key
        heap[size] = v
        sift_up(heap, spot, key, size)
        return size + 1
    old_key = key[v]
    key[v] = new_key
    if new_key > old_key:
        sift_up(heap, spot, key, i)
    elif new_key < old_key:
        sift_down(heap, spot, key, i, size)
    return size


@jit
def drop(heap: Array, spot: Array, key: Array, v: int, size: int) -> int:
    """Take v out of the heap; return the new size."""
    i = spot[v]
    spot[v] = -1
    size -= 1
    if i < size:
        u = heap[size]
        heap[i] = u
        spot[u] = i
        sift_up(heap, spot, key, i)
        sift_down(heap, spot, key, spot[u], size)
    return size
