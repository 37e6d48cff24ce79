"""The least moved weight of contiguous splits, by trying every pair of neighbouring cuts."""

from __future__ import annotations

from collections.abc import Sequence

__all__ = ["least_moved_weight"]


def least_moved_weight(
    weight: Sequence[int],
    home: Sequence[int],
    label: Sequence[int],
    most: Sequence[int],
    *,
    limit_weight: Sequence[int] | None = None,
    limit: Sequence[int] | None = None,
) -> int | None:
    """Return the least weight of items whose chunk has another label than their home.

    Chunk p is called `label[p]`, holds an item at least, weighs at most `most[p]` and at most
    `limit[p]` of the second weight. None if there is no such division. O(n_parts n^2).
    """
    n, n_parts = len(weight), len(label)
    best: list[dict[int, int]] = [{0: 0}]
    for p in range(n_parts):
        found: dict[int, int] = {}
        for begin, moved in best[-1].items():
            load = second = leaving = 0
            for end in range(begin + 1, n + 1):
                load += weight[end - 1]
                second += 0 if limit_weight is None else limit_weight[end - 1]
                leaving += weight[end - 1] * (home[end - 1] != label[p])
                if load > most[p] or (limit is not None and second > limit[p]):
                    break
                found[end] = min(found.get(end, moved + leaving), moved + leaving)
        best.append(found)
    return best[-1].get(n)
