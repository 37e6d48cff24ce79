"""Connected pieces of equal label among a rank's own vertices."""

from __future__ import annotations

from sfcpart.dtypes import Array
from sfcpart.kernels._jit import jit

__all__ = ["label_own_pieces"]


@jit
def label_own_pieces(
    n_own: int, indptr: Array, indices: Array, part: Array, piece: Array, first: Array
) -> int:
    """Number the pieces in `piece` (n_own,) by first vertex; return how many there are.

    `first` (n_own,) begins with the first vertex of each piece. Ghosts join nothing here.
    """
    for v in range(n_own):
        piece[v] = -1
    count = 0
    for seed in range(n_own):
        if piece[seed] >= 0:
            continue
        piece[seed] = count
        # the free end of `first` is the stack: pieces found and vertices waiting never exceed n_own
        first[count] = seed
        top = n_own - 1
        first[top] = seed
        while top < n_own:
            v = first[top]
            top += 1
            for j in range(indptr[v], indptr[v + 1]):
                u = indices[j]
                if u < n_own and piece[u] < 0 and part[u] == part[v]:
                    piece[u] = count
                    top -= 1
                    first[top] = u
        first[count] = seed
        count += 1
    return count
