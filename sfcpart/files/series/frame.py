"""One state of a run: the mesh, where its cells come from, and what they weigh."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from sfcpart.errors import InputError, WeightError
from sfcpart.mesh.mesh import Mesh

__all__ = ["Frame"]


@dataclass(frozen=True, eq=False)
class Frame:
    """One state of a run; a series is an iterable of these.

    Attributes
    ----------
    mesh : Mesh
    weight : (n_cells,) numbers, optional
        Work of each cell; 1 each by default.
    parent : (n_cells,) integers, optional
        Cell of the frame before that each cell lies in (or, where cells were joined, one that lay
        in it), -1 where that is not known: then the one with the nearest centre. None: the cells
        of the frame before, if all centres are where they were, else the nearest ones.
    steps : int
        Steps of the solver for which this state lasts.
    speed : (n_parts,) numbers, optional
        Relative speed of each rank meanwhile.

    Raises
    ------
    InputError, WeightError
        If an array has not one row a cell, parents are no whole numbers, or there is no step.

    Examples
    --------
    >>> Frame(Mesh.from_centers([[0.0, 0.0], [1.0, 0.0]]), weight=[1.0, 3.0]).n_cells
    2
    """

    mesh: Mesh
    weight: ArrayLike | None = None
    parent: ArrayLike | None = None
    steps: int = 1
    speed: ArrayLike | None = None

    def __post_init__(self) -> None:
        if self.weight is not None and np.shape(self.weight) != (self.n_cells,):
            raise WeightError(
                f"weights have shape {np.shape(self.weight)}; wanted one a cell, ({self.n_cells},)"
            )
        if self.parent is not None:
            array = np.asarray(self.parent)
            if array.shape != (self.n_cells,) or array.dtype.kind not in "iu":
                raise InputError(
                    f"parents are {array.dtype} of shape {array.shape}; wanted whole numbers, one "
                    f"a cell, ({self.n_cells},)"
                )
        whole = isinstance(self.steps, int | np.integer) and not isinstance(self.steps, bool)
        if not whole or self.steps < 1:
            raise InputError(f"a frame lasts {self.steps!r} steps; wanted a whole number >= 1")

    @property
    def n_cells(self) -> int:
        """Number of cells."""
        return self.mesh.n_cells
