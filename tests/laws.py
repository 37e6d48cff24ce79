"""Problems for the law "same answer for any number of ranks and threads, bit for bit".

Each is made from its name alone, so that the processes of an MPI job and their parent agree.
"""

from __future__ import annotations

import zlib
from collections.abc import Callable
from typing import Any

import numpy as np

from sfcpart.comm.base import Comm
from sfcpart.methods.problem import Problem

__all__ = ["PROBLEMS", "problem_of", "rank_slice"]

_PER_CELL = ("centers", "weight", "limit_weight", "group")


def _cloud(n: int, dim: int, rng: np.random.Generator) -> np.ndarray:
    return rng.random((n, dim))


def _lattice(n: int, dim: int, rng: np.random.Generator) -> np.ndarray:
    """Make centres of which many coincide, so that ties and deeper keys count."""
    return rng.integers(0, 5, (n, dim)) * 0.25


def _nearly_alike(n: int, dim: int, rng: np.random.Generator) -> np.ndarray:
    """Make centres that share their keys but not their deeper keys."""
    points = rng.random((n, dim)) * 2.0**-30
    points[0], points[-1] = 0.0, 1.0
    return points


def _plain(rng: np.random.Generator, n: int) -> dict[str, Any]:
    return {"n_parts": 7, "part_speed": np.ones(7)}


def _weighted(rng: np.random.Generator, n: int) -> dict[str, Any]:
    return {"n_parts": 6, "part_speed": np.ones(6), "weight": rng.integers(0, 50, n)}


def _uneven(rng: np.random.Generator, n: int) -> dict[str, Any]:
    """Make unequal speeds, nested levels and a limit that can be kept."""
    weight = rng.integers(1, 9, n)
    return {
        "n_parts": 6,
        "part_speed": np.array([1.0, 1.0, 2.0, 0.5, 3.0, 1.0]),
        "level_sizes": (2, 3),
        "weight": weight,
        "limit_weight": np.ones(n, np.int64),
        "part_limit": np.full(6, n, np.int64),
    }


def _grouped(rng: np.random.Generator, n: int) -> dict[str, Any]:
    group = np.where(rng.random(n) < 0.3, rng.integers(0, max(1, n // 10), n), -1)
    return {"n_parts": 5, "part_speed": np.ones(5), "weight": rng.integers(1, 9, n), "group": group}


def _few(rng: np.random.Generator, n: int) -> dict[str, Any]:
    """Ask for more parts than there are cells."""
    return {"n_parts": n + 3, "part_speed": np.ones(n + 3)}


_Make = Callable[[int, int, np.random.Generator], np.ndarray]
_Options = Callable[[np.random.Generator, int], dict[str, Any]]

PROBLEMS: dict[str, tuple[_Make, int, int, _Options]] = {
    "cloud": (_cloud, 500, 3, _plain),
    "cloud_2d": (_cloud, 500, 2, _weighted),
    "lattice": (_lattice, 400, 3, _weighted),
    "nearly_alike": (_nearly_alike, 200, 3, _plain),
    "nearly_alike_2d": (_nearly_alike, 200, 2, _weighted),
    "speeds_levels_limits": (_cloud, 300, 3, _uneven),
    "groups": (_cloud, 300, 3, _grouped),
    "groups_on_lattice": (_lattice, 300, 2, _grouped),
    "fewer_cells_than_ranks": (_cloud, 2, 3, _few),
}


def problem_of(name: str, comm: Comm, *, n_cells: int | None = None, **changes: Any) -> Problem:
    """Make this rank's slice of a problem by name."""
    make, n, dim, options = PROBLEMS[name]
    n = n_cells or n
    rng = np.random.default_rng(zlib.crc32(name.encode()))
    whole = {"centers": make(n, dim, rng), **options(rng, n), **changes}
    lo, hi = rank_slice(n, comm.rank, comm.size)
    mine = {key: value[lo:hi] if key in _PER_CELL else value for key, value in whole.items()}
    return Problem(**mine, first_gid=lo, graph=_no_graph, comm=comm)


def rank_slice(n: int, rank: int, size: int) -> tuple[int, int]:
    """Return a rank's cells: slices of unequal length, that of rank 1 empty."""
    share = np.arange(1, size + 1) * (np.arange(size) != 1)
    edge = np.concatenate(([0], np.cumsum(share))) * n // share.sum()
    return int(edge[rank]), int(edge[rank + 1])


def _no_graph() -> Any:
    raise AssertionError("a method without need asked for the cell graph")
