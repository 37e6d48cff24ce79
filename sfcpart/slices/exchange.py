"""An exchange on its way: buffers that are set up once for each form of rows, and used again."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal, TypeAlias

import numpy as np

from sfcpart.dtypes import Array, Int64Array
from sfcpart.errors import InputError

if TYPE_CHECKING:
    from sfcpart.comm.base import Comm, Link
    from sfcpart.slices.lists import ExchangeLists

__all__ = ["Exchange", "Lane", "Way", "open_lane", "pack"]

Way: TypeAlias = Literal["forward", "back"]


@dataclass(frozen=True, eq=False)
class Lane:
    """Buffers and link of the exchanges of one form; one exchange at a time may use it."""

    sent: Array
    received: Array
    link: Link


class Exchange:
    """An exchange on its way (`Halo.start`, `Halo.start_back`).

    Parameters
    ----------
    lane : buffers of the rows on their way, which nobody else uses meanwhile
    land : callable
        Puts what came where it belongs.

    Examples
    --------
    >>> from sfcpart.comm import SerialComm
    >>> from sfcpart.parallel import Halo
    >>> halo = Halo.from_cells([], cell_gid=[0, 1], comm=SerialComm())
    >>> coming = halo.start(np.zeros(2))  # compute what needs no halo; then
    >>> coming.finish().shape
    (0,)
    """

    def __init__(self, lane: Lane, land: Callable[[Lane], Array]) -> None:
        self._lane: Lane | None = lane
        self._land = land
        lane.link.start()

    def finish(self) -> Array:
        """Wait for the neighbours' rows and put them where they belong.

        Returns
        -------
        array
            What `Halo.exchange` or `Halo.add_back` returns.

        Raises
        ------
        InputError
            If it is called a second time.
        RankError
            If a neighbour sent rows of another form.

        Examples
        --------
        >>> from sfcpart.comm import SerialComm
        >>> from sfcpart.parallel import Halo
        >>> halo = Halo.from_cells([], cell_gid=[0, 1], comm=SerialComm())
        >>> halo.start_back(np.ones(2)).finish().tolist()
        [1.0, 1.0]
        """
        if self._lane is None:
            raise InputError("an exchange is finished twice; start it again first")
        lane, self._lane = self._lane, None
        lane.link.finish()
        return self._land(lane)


def open_lane(way: Way, array: Array, *, plan: ExchangeLists, comm: Comm) -> Lane:
    """Make the buffers and the link for rows like those of an array."""
    dtype, trailing = array.dtype.newbyteorder("="), array.shape[1:]
    at_targets = np.empty((len(plan.send), *trailing), dtype)
    at_sources = np.empty((plan.n_halo, *trailing), dtype)
    send, halo = plan.targets(), plan.sources()
    if way == "forward":
        link = comm.link(at_targets, at_sources, targets=send, sources=halo)
        return Lane(at_targets, at_sources, link)
    link = comm.link(at_sources, at_targets, targets=halo, sources=send)
    return Lane(at_sources, at_targets, link)


def pack(array: Array, rows: Int64Array, out: Array) -> None:
    """Copy some rows into a buffer."""
    if array.flags.c_contiguous and array.dtype == out.dtype:
        np.take(array, rows, axis=0, out=out, mode="clip")  # "raise" would copy once more
    else:
        out[...] = array[rows]
