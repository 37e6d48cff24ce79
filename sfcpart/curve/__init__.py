"""Curve keys and curve order of cell centres: Hilbert, and two baselines.

Centres are scaled alike on every axis from their bounding box to integers of 31 bits an axis in
2-D and 21 in 3-D, and numbered along the curve. Axes on which all centres agree are left out, so
a flat mesh in 3-D gets 2-D keys, and a straight one 62-bit positions.

- "hilbert": Hilbert's curve; in 3-D the reflected-Gray-code curve of J. Skilling (AIP Conf. Proc.
  707, 381 (2004)), one of 10,694,807 that share the defining properties of the 2-D curve
  (H. Haverkort, arXiv:1109.2323). The first axis has the most significant bit of a digit.
- "morton": the bits of the axes interleaved (Z-order), the first axis most significant.
- "rows": row after row: by the last axis, then the one before, so strips (slabs) in the end.

Centres that share a key are ordered by a deeper key, the next 21 bits an axis in 3-D (28 in 2-D:
all a double holds), computed only for them, and then by cell number.

Translating all centres by an amount that leaves them exact (a dyadic one), or scaling them by a
power of two, changes no key: `(x - low) * ((2**bits - 1) / extent)` rounds alike.
"""

from __future__ import annotations

from sfcpart.curve.frame import CURVES, Curve
from sfcpart.curve.keys import curve_keys
from sfcpart.curve.order import CurveSlice, curve_order, curve_slice, key_slice, mesh_slice

__all__ = [
    "CURVES",
    "Curve",
    "CurveSlice",
    "curve_keys",
    "curve_order",
    "curve_slice",
    "key_slice",
    "mesh_slice",
]
