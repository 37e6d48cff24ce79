"""Halo exchange: fill the rows of foreign cells, and add what they gathered back to the owners.

An array of cells has its owned rows first, then the halo rows (`ExchangePlan`). Rows of any
fixed-size dtype and trailing shape travel as bytes, to and from neighbours only, through buffers
that are set up at the first exchange of a form and used again (under MPI: persistent requests).

Cost of an exchange: one copy of the rows sent, one of the rows received, a message a neighbour.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

import numpy as np  # noqa: F401 - the examples use it
from numpy.typing import ArrayLike

from sfcpart.comm import adopt
from sfcpart.dtypes import Array, Int64Array
from sfcpart.parallel.gate import checked_faces, checked_graph
from sfcpart.parallel.lanes import Lanes
from sfcpart.slices.exchange import Exchange
from sfcpart.slices.gate import agreed
from sfcpart.slices.lists import ExchangePlan

if TYPE_CHECKING:
    from sfcpart.comm.base import Comm

__all__ = ["Halo"]


@dataclass(frozen=True, eq=False)
class Halo:
    """The cells of others that this rank needs, and the exchange that keeps them up to date.

    Every rank of `comm` makes its Halo and starts and finishes exchanges at the same points, in
    the same order and with rows of the same dtype and trailing shape, also ranks without cells or
    neighbours. Arguments of an exchange are checked on each rank alone, so that a step costs no
    message more than needed: a rank that raises there leaves its neighbours waiting, as with any
    message of MPI that is not sent.

    Attributes
    ----------
    comm : Comm
    plan : ExchangePlan
        Who sends which rows to whom.

    Examples
    --------
    >>> from sfcpart.comm import run_ranks
    >>> def act(comm):  # two ranks share a row of four cells; each owns two
    ...     cell_gid = np.array([0, 1]) + 2 * comm.rank
    ...     faces = [[0, 1], [1, 2], [2, 3]][comm.rank : comm.rank + 2]
    ...     halo = Halo.from_faces(faces, cell_gid=cell_gid, comm=comm)
    ...     value = np.append(10.0 * cell_gid, np.zeros(halo.n_halo))
    ...     halo.exchange(value)
    ...     return value.tolist()
    >>> run_ranks(2, act)
    [[0.0, 10.0, 20.0], [20.0, 30.0, 10.0]]
    """

    comm: Comm
    plan: ExchangePlan
    _lanes: Lanes = field(init=False, repr=False)

    def __post_init__(self) -> None:
        object.__setattr__(self, "_lanes", Lanes(self.comm, self.plan))

    @classmethod
    def from_graph(
        cls, indptr: ArrayLike, indices: ArrayLike, *, cell_gid: ArrayLike, comm: Any
    ) -> Halo:
        """Make the halo of all neighbours in the local cell graph.

        Parameters
        ----------
        indptr : (n_owned + 1,) integers
        indices : (n_entries,) integers
            Neighbours as global cell numbers; negatives mean none.
        cell_gid : (n_owned,) integers
            Global numbers of the owned cells, in local order; any ownership.
        comm : mpi4py communicator, or Comm

        Returns
        -------
        Halo

        Raises
        ------
        InputError
            If the relation is malformed, a cell is owned twice, or a neighbour by nobody.
            All ranks raise it alike.

        Notes
        -----
        O(n log n) for n local cells and entries; messages of 8 bytes a cell and 20 a halo cell.

        Examples
        --------
        >>> from sfcpart.comm import run_ranks
        >>> def act(comm):  # a ring of three cells, one a rank
        ...     beside = [(comm.rank - 1) % 3, (comm.rank + 1) % 3]
        ...     return Halo.from_graph([0, 2], beside, cell_gid=[comm.rank], comm=comm)
        >>> [halo.halo_gid.tolist() for halo in run_ranks(3, act)]
        [[1, 2], [0, 2], [0, 1]]
        """
        comm = adopt(comm)
        needed = agreed(comm, lambda: checked_graph(indptr, indices, cell_gid))
        return cls(comm, ExchangePlan.of(needed, cell_gid=cell_gid, comm=comm))

    @classmethod
    def from_faces(cls, face_cell_gid: ArrayLike, *, cell_gid: ArrayLike, comm: Any) -> Halo:
        """Make the halo of the foreign cells at the faces of this rank.

        Parameters
        ----------
        face_cell_gid : (n_faces, 2) integers
            Global numbers of the cells of each face; negatives where there is none (boundary). At
            least one is owned. A face between two ranks may be held by one of them or by both.
        cell_gid, comm
            As for `from_graph`.

        Returns
        -------
        Halo

        Raises
        ------
        InputError
            As `from_graph`, or if a face touches no cell of this rank.

        Examples
        --------
        >>> from sfcpart.comm import run_ranks
        >>> def act(comm):  # one face, held by rank 0 alone, which then adds flows back
        ...     faces = [[0, 1]][comm.rank :]
        ...     return Halo.from_faces(faces, cell_gid=[comm.rank], comm=comm).n_halo
        >>> run_ranks(2, act)
        [1, 0]
        """
        comm = adopt(comm)
        needed = agreed(comm, lambda: checked_faces(face_cell_gid, cell_gid))
        return cls(comm, ExchangePlan.of(needed, cell_gid=cell_gid, comm=comm))

    @classmethod
    def from_cells(cls, needed_gid: ArrayLike, *, cell_gid: ArrayLike, comm: Any) -> Halo:
        """Make the halo of given cells, for wider stencils.

        Parameters
        ----------
        needed_gid : (n,) integers
            Cells this rank needs, in any order; owned ones, doubles and negatives are ignored.
        cell_gid, comm
            As for `from_graph`.

        Returns
        -------
        Halo

        Raises
        ------
        InputError
            As `from_graph`.

        Examples
        --------
        >>> from sfcpart.comm import run_ranks
        >>> def act(comm):
        ...     cell_gid = [comm.rank, 3 - comm.rank]
        ...     return Halo.from_cells([3, 2, 0, 3], cell_gid=cell_gid, comm=comm)
        >>> [halo.halo_gid.tolist() for halo in run_ranks(2, act)]
        [[2], [0, 3]]
        """
        comm = adopt(comm)
        return cls(comm, ExchangePlan.of(needed_gid, cell_gid=cell_gid, comm=comm))

    @property
    def n_owned(self) -> int:
        """Number of owned cells."""
        return self.plan.n_owned

    @property
    def n_halo(self) -> int:
        """Number of halo cells."""
        return self.plan.n_halo

    @property
    def halo_gid(self) -> Int64Array:
        """Global numbers of the halo cells, by owner, then number: (n_halo,) int64."""
        return self.plan.halo_gid

    def local_rows(self, gid: ArrayLike) -> Int64Array:
        """Return local rows: owned cells first, then the halo.

        Parameters
        ----------
        gid : integers of any shape
            Global cell numbers.

        Returns
        -------
        int64 of that shape
            -1 for negatives.

        Raises
        ------
        InputError
            If a cell is neither owned nor in the halo.

        Examples
        --------
        >>> from sfcpart.comm import SerialComm
        >>> halo = Halo.from_cells([], cell_gid=[7, 5], comm=SerialComm())
        >>> halo.local_rows([5, 7, -1]).tolist()
        [1, 0, -1]
        """
        return self.plan.local_rows(gid)

    def exchange(self, array: Array) -> Array:
        """Bring the values of foreign cells here, and wait for them.

        Parameters
        ----------
        array : (n_owned + n_halo, ...) or (n_owned, ...) of any fixed-size dtype
            With halo rows, these are filled in place.

        Returns
        -------
        (n_halo, ...) array
            The halo rows: a view of `array` if it has them, else a new array.

        Raises
        ------
        InputError
            If the array has another number of rows, holds objects, or cannot be written to.
        RankError
            If a neighbour sent rows of another form.

        Notes
        -----
        One copy of the rows sent and received, and one message to and from each neighbour.

        Examples
        --------
        >>> from sfcpart.comm import run_ranks
        >>> def act(comm):
        ...     halo = Halo.from_cells([0, 1], cell_gid=[comm.rank], comm=comm)
        ...     return halo.exchange(np.array([[10.0 * comm.rank, 1.0]])).tolist()
        >>> run_ranks(2, act)
        [[[10.0, 1.0]], [[0.0, 1.0]]]
        """
        return self.start(array).finish()

    def start(self, array: Array) -> Exchange:
        """Start what `exchange` does, and return at once.

        The owned rows are copied before it returns: they may change while the exchange is on its
        way. Halo rows are written by `finish`. Several exchanges may be on their way at once.

        Parameters
        ----------
        array
            As for `exchange`.

        Returns
        -------
        Exchange

        Examples
        --------
        >>> from sfcpart.comm import run_ranks
        >>> def act(comm):
        ...     halo = Halo.from_cells([0, 1], cell_gid=[comm.rank], comm=comm)
        ...     array = np.array([comm.rank, -1])
        ...     coming = halo.start(array)
        ...     array[0] += 5  # inner cells, meanwhile
        ...     coming.finish()
        ...     return array.tolist()
        >>> run_ranks(2, act)
        [[5, 1], [6, 0]]
        """
        return self._lanes.forward(array)

    def add_back(self, array: Array) -> Array:
        """Add the halo rows to the owned rows of their owners, and set them to zero.

        This is the adjoint of `exchange`. Contributions are added in the order of the ranks they
        come from: the same sums in every run on as many ranks with the same cells. (Integers give
        the same sums on any ranks.)

        Parameters
        ----------
        array : (n_owned + n_halo, ...) of integers, floats or complex numbers

        Returns
        -------
        (n_owned, ...) array
            The owned rows, a view of `array`.

        Raises
        ------
        InputError, RankError
            As for `exchange`, or if the rows cannot be added.

        Examples
        --------
        >>> from sfcpart.comm import run_ranks
        >>> def act(comm):  # each rank finds 3 for the cell of the other
        ...     halo = Halo.from_cells([0, 1], cell_gid=[comm.rank], comm=comm)
        ...     return halo.add_back(np.array([comm.rank, 3])).tolist()
        >>> run_ranks(2, act)
        [[3], [4]]
        """
        return self.start_back(array).finish()

    def start_back(self, array: Array) -> Exchange:
        """Start what `add_back` does: halo rows are zero when it returns, `finish` adds.

        Parameters
        ----------
        array
            As for `add_back`.

        Returns
        -------
        Exchange

        Raises
        ------
        InputError
            As for `add_back`.

        Examples
        --------
        >>> from sfcpart.comm import SerialComm
        >>> halo = Halo.from_cells([], cell_gid=[0], comm=SerialComm())
        >>> halo.start_back(np.array([2.5])).finish().tolist()
        [2.5]
        """
        return self._lanes.back(array)
