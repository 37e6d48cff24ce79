"""The exchanges of one halo: rows checked, packed, sent, and put where they belong.

Buffers and links (lanes) are made at the first exchange of a form (way, dtype, trailing shape) and
used again; while one is on its way, another exchange of that form gets a lane of its own.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any, TypeAlias

import numpy as np

from sfcpart.dtypes import Array
from sfcpart.errors import InputError
from sfcpart.slices.exchange import Exchange, Lane, Way, open_lane, pack

if TYPE_CHECKING:
    from sfcpart.comm.base import Comm
    from sfcpart.slices.lists import ExchangePlan

__all__ = ["Lanes"]

_Form: TypeAlias = tuple[Way, Any, tuple[int, ...]]


@dataclass(frozen=True, eq=False)
class Lanes:
    """The lanes of a plan.

    Attributes
    ----------
    comm : Comm
    plan : ExchangePlan
    """

    comm: Comm
    plan: ExchangePlan
    _idle: dict[_Form, list[Lane]] = field(default_factory=dict, init=False, repr=False)

    def forward(self, array: Array) -> Exchange:
        """Start to bring the values of foreign cells here (`Halo.start`)."""
        n_owned, whole = self.plan.n_owned, self._checked(array, needs_halo=False)
        form, lane = self._lane("forward", array)
        pack(array, self.plan.send, lane.sent)

        def land(lane: Lane) -> Array:
            if whole:
                array[n_owned:] = lane.received
                halo_rows = array[n_owned:]
            else:
                halo_rows = lane.received.astype(array.dtype)
            self._idle[form].append(lane)
            return halo_rows

        return Exchange(lane, land)

    def back(self, array: Array) -> Exchange:
        """Start to add the halo rows to those of their owners (`Halo.start_back`)."""
        n_owned = self.plan.n_owned
        self._checked(array, needs_halo=True)
        if array.dtype.kind not in "iufc":
            raise InputError(f"{array.dtype} rows to add; wanted integers, floats or complex")
        form, lane = self._lane("back", array)
        lane.sent[...] = array[n_owned:]
        array[n_owned:] = 0

        def land(lane: Lane) -> Array:
            for _, lo, hi in self.plan.targets():  # within one, no row occurs twice
                array[self.plan.send[lo:hi]] += lane.received[lo:hi]
            self._idle[form].append(lane)
            return array[:n_owned]

        return Exchange(lane, land)

    def _checked(self, array: Array, *, needs_halo: bool) -> bool:
        """Tell whether the array has halo rows; refuse what cannot be exchanged."""
        n_owned, n_halo = self.plan.n_owned, self.plan.n_halo
        whole = n_owned + n_halo
        fits = isinstance(array, np.ndarray) and array.ndim > 0
        if not fits or (len(array) != whole and (needs_halo or len(array) != n_owned)):
            what = f"an array of shape {array.shape}" if isinstance(array, np.ndarray) else array
            other = "" if needs_halo else f", or the {n_owned} owned ones alone"
            raise InputError(
                f"{what!s} to exchange; wanted an array of {whole} rows, {n_owned} owned and "
                f"{n_halo} in the halo{other}"
            )
        if array.dtype.hasobject:
            raise InputError(f"{array.dtype} rows to exchange; wanted a fixed-size dtype")
        is_whole = n_halo > 0 and len(array) == whole
        if (is_whole or needs_halo) and not array.flags.writeable:
            raise InputError("the array is read-only; wanted one whose halo rows can be filled")
        return is_whole

    def _lane(self, way: Way, array: Array) -> tuple[_Form, Lane]:
        """Take an idle lane for the rows of an array, or make one; return what it is kept under."""
        form = way, array.dtype, array.shape[1:]
        idle = self._idle.setdefault(form, [])
        lane = idle.pop() if idle else open_lane(way, array, plan=self.plan, comm=self.comm)
        return form, lane
