"""Place cuts as near to their fair positions as a bottleneck lets them, from the left.

The end of a chunk is the last good position up to the wanted one that the chunk can reach, else
the first good one above. A walk goes from the first rank to the last (`Comm.relay`). Where the
best position of a stretch may be beaten by one on the next, the walk takes both courses along: the
open choice, and what follows if it stays; whichever does not come true is dropped.

Cost: O(log n) a cut on the stretch that it lies on; a few numbers from rank to rank, and in the
end P pairs of numbers to every rank.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from sfcpart.dtypes import Int64Array
from sfcpart.methods.curve.abreast import Ask, Asking
from sfcpart.methods.curve.stretch import Stretch

__all__ = ["place_cuts"]

_NONE = np.array([-1, 0, 0], np.int64)
_NO_ROWS = np.empty((0, 2), np.int64)


@dataclass(eq=False)
class _Choice:
    """An open choice: the end of chunk `part`, which begins at `origin`; the best end so far.

    `origin` and `best` are (position, weight before, limited weight before); `fixed` holds the
    (cut, position) that were chosen since the choice before this one, if that ends at its best.
    """

    part: int
    origin: Int64Array
    best: Int64Array = field(default_factory=_NONE.copy)
    fixed: Int64Array = field(default_factory=_NO_ROWS.copy)

    @property
    def is_open(self) -> bool:
        """Tell whether no end was found yet."""
        return bool(self.best[0] < 0)

    def following(self) -> _Choice:
        """Return the next choice, if this one ends at its best."""
        return _Choice(self.part + 1, self.best)


def place_cuts(here: Stretch, wanted: Int64Array, *, origin: Int64Array) -> Asking[Int64Array]:
    """Choose every cut.

    Parameters
    ----------
    here : Stretch
        With its good positions found.
    wanted : (P + 1,) int64
        Fair positions.
    origin : (3,) int64
        Begin of the range, weight and limited weight before it.

    Returns
    -------
    (P + 1,) int64
    """
    certain = [_NO_ROWS]

    def step(packed: Int64Array) -> Int64Array:
        choices = _walk(here, wanted, _unpack(packed))
        certain.append(choices[0].fixed)
        choices[0].fixed = _NO_ROWS
        return _pack(choices)

    left = _unpack((yield Ask("last", _pack([_Choice(0, origin)]), step)))
    found: list[Int64Array] = yield Ask("gather", np.concatenate(certain))
    cut = np.full(here.n_parts + 1, here.end, np.int64)
    cut[0] = here.begin
    for rows in [*found, *(choice.fixed for choice in left)]:
        cut[rows[:, 0]] = rows[:, 1]
    for choice in left:  # beyond the last rank there is no better end; then only empty parts
        if not choice.is_open:
            cut[choice.part + 1] = choice.best[0]
    return cut


def _walk(here: Stretch, wanted: Int64Array, choices: list[_Choice]) -> list[_Choice]:
    """Make the choices that can be made on this stretch; return those that stay open."""
    if not len(here):
        return choices
    still_open: list[_Choice] = []
    fixed: list[Int64Array] = []
    choice, follow = choices[0], choices[1:]
    while True:
        fixed.append(choice.fixed)
        if choice.is_open and not follow:
            choice, passed = _advance(here, wanted, choice)
            fixed.append(passed)
        at_end = choice.part >= here.n_parts - 1
        if not at_end and _decide(here, wanted, choice, follow):
            fixed.append(np.array([[choice.part + 1, choice.best[0]]], np.int64))
        else:
            choice.fixed, fixed = np.concatenate(fixed), []
            still_open.append(choice)
            if at_end or choice.is_open:
                return still_open
        choice = follow.pop(0) if follow else choice.following()


def _decide(here: Stretch, wanted: Int64Array, choice: _Choice, follow: list[_Choice]) -> bool:
    """Look for a better end on this stretch; tell whether the choice is made."""
    aim = int(wanted[choice.part + 1])
    near, above = here.pick(choice.part, choice.origin, aim)
    if near >= 0:
        choice.best = here.sums_before(near)
        follow.clear()  # they begin at an end that was beaten
    if not here.ends_here(choice.part, choice.origin, aim):
        return False
    if choice.is_open and above >= 0:
        choice.best = here.sums_before(above)
    return not choice.is_open


def _advance(here: Stretch, wanted: Int64Array, choice: _Choice) -> tuple[_Choice, Int64Array]:
    """Make as many choices as lie on this stretch without doubt."""
    origin = choice.origin.copy()
    cut = np.empty(here.n_parts + 1, np.int64)
    part = here.walk(choice.part, origin, wanted, cut)
    passed = np.arange(choice.part + 1, part + 1)
    return _Choice(part, origin), np.stack([passed, cut[passed]], axis=1)


def _pack(choices: list[_Choice]) -> Int64Array:
    """Return choices in one array."""
    pieces = [
        piece
        for choice in choices
        for piece in (
            [choice.part, len(choice.fixed)],
            choice.origin,
            choice.best,
            choice.fixed.ravel(),
        )
    ]
    return np.concatenate(pieces).astype(np.int64)


def _unpack(packed: Int64Array) -> list[_Choice]:
    """Take choices apart."""
    choices = []
    while len(packed):
        part, n_fixed = int(packed[0]), int(packed[1])
        stop = 8 + 2 * n_fixed
        fixed = packed[8:stop].reshape(-1, 2)
        choices.append(_Choice(part, packed[2:5], packed[5:8].copy(), fixed))
        packed = packed[stop:]
    return choices
