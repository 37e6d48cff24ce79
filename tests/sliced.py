"""Meshes cut into slices for tests: even, with empty slices, one rank holding all."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
from hypothesis import strategies as st

from sfcpart.comm import run_ranks
from sfcpart.mesh.mesh import Mesh
from sfcpart.slices.mesh_slice import MeshSlice, cut_mesh

__all__ = ["SIZES", "all_bounds", "bounds", "on_slices"]

SIZES = (1, 2, 3, 4, 7)


def on_slices(mesh: Mesh, rank_first: Any, act: Callable[[MeshSlice], Any]) -> list[Any]:
    """Return what `act` makes of each rank's slice."""

    def run(comm: Any) -> Any:
        return act(cut_mesh(mesh, comm, rank_first=rank_first))

    return run_ranks(len(rank_first) - 1, run)


def all_bounds(n: int) -> list[np.ndarray]:
    """Return even slices for all sizes; one rank of four with all; two ranks with none."""
    even = [np.array([n * r // size for r in range(size + 1)]) for size in SIZES]
    return [*even, np.array([0, 0, 0, n, n]), np.array([0, n // 3, n // 3, n // 3, n])]


@st.composite
def bounds(draw: st.DrawFn, n: int) -> np.ndarray:
    """Draw the slices of 1 to 7 ranks, empty ones often."""
    size = draw(st.sampled_from(SIZES))
    inner = draw(st.lists(st.integers(0, n), min_size=size - 1, max_size=size - 1))
    return np.array([0, *sorted(inner), n])
