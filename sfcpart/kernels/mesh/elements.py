"""Find the cells that hold boundary elements: those with all of an element's points.

Cost: O(elements x cells at a point), one pass, no sort.
"""

from __future__ import annotations

from sfcpart.dtypes import Int64Array, IntArray
from sfcpart.kernels._jit import jit

__all__ = ["cells_with_points"]


@jit
def cells_with_points(
    start: int,
    stop: int,
    element_indptr: Int64Array,
    element_points: IntArray,
    point_indptr: Int64Array,
    point_cells: Int64Array,
    indptr: Int64Array,
    indices: IntArray,
    found: Int64Array,
) -> None:
    """Write the first two cells, in the order of `point_cells`, that hold each element.

    `point_indptr` and `point_cells` list the cells at each point; `found` (n_elements, 2) comes
    in as -1.
    """
    for element in range(start, stop):
        first, last = element_indptr[element], element_indptr[element + 1]
        if first == last:
            continue
        pivot = element_points[first]
        for at in range(first + 1, last):
            point = element_points[at]
            if (
                point_indptr[point + 1] - point_indptr[point]
                < point_indptr[pivot + 1] - point_indptr[pivot]
            ):
                pivot = point
        n_found = 0
        for c in range(point_indptr[pivot], point_indptr[pivot + 1]):
            cell = point_cells[c]
            holds = True
            for at in range(first, last):
                met = False
                for e in range(indptr[cell], indptr[cell + 1]):
                    if indices[e] == element_points[at]:
                        met = True
                        break
                if not met:
                    holds = False
                    break
            if holds:
                found[element, n_found] = cell
                n_found += 1
                if n_found == 2:
                    break
