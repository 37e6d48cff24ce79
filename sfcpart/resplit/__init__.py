"""When the work moves: split again so that little moves, and know whether it pays.

Everything here speaks of the cells of the mesh that is to be split (the new one, if it changed)
and of the *home part* of each: the part whose rank holds its data now (`rebalance.origin`). A cell
moves where its new part is another than its home.

Ways to split again are in one table (`rebalance.ways`); what moves, what that takes and the least
that any split must move are a `Migration`; whether it pays is a `Verdict`.
"""

from __future__ import annotations
