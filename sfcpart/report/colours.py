"""Colours of parts: parts that touch differ, from a published set for colour-blind readers.

The set is that of M. Okabe and K. Ito, Color Universal Design (2008), without black: seven hues,
recalled from memory. Where touching parts need more than seven, paler and darker tones of the same
hues follow. Parts are coloured greedily, those with most neighbours first (D. J. A. Welsh and
M. B. Powell, Computer Journal 10:85, 1967, from memory), each with the allowed hue used least.
"""

from __future__ import annotations

import numpy as np

from sfcpart.dtypes import FloatArray, Int64Array

__all__ = ["PALETTE", "part_colours"]

PALETTE = ("#E69F00", "#56B4E9", "#009E73", "#F0E442", "#0072B2", "#D55E00", "#CC79A7")
"""Okabe and Ito's orange, sky blue, bluish green, yellow, blue, vermilion, reddish purple."""


def part_colours(neighbours: list[Int64Array]) -> FloatArray:
    """Return a colour for each part, (n_parts, 3) between 0 and 1; neighbours differ."""
    n_parts = len(neighbours)
    colour = np.full(n_parts, -1)
    used = np.zeros(len(PALETTE), np.int64)
    order = sorted(range(n_parts), key=lambda part: (-len(neighbours[part]), part))
    for part in order:
        taken = set(colour[neighbours[part]].tolist())
        free = [k for k in range(len(used)) if k not in taken]
        if not free:
            free = [len(used)]
            used = np.append(used, 0)
        colour[part] = min(free, key=lambda k: (int(used[k]), k))
        used[colour[part]] += 1
    tones: FloatArray = _tones(len(used))[colour]
    return tones


def _tones(count: int) -> FloatArray:
    """Return the set, then its paler tones, then its darker ones, as often as needed."""
    base = np.array([[int(h[i : i + 2], 16) for i in (1, 3, 5)] for h in PALETTE]) / 255.0
    rounds = -(-count // len(base))
    tones = [base]
    for k in range(1, rounds):
        depth = 1 - 0.55 ** ((k + 1) // 2)
        target = 1.0 if k % 2 else 0.0
        tones.append(base * (1 - depth) + target * depth)
    return np.concatenate(tones)[:count]
