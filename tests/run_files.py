"""Files of measured seconds and of series, written into the folder we are in."""

from __future__ import annotations

from functools import cache
from pathlib import Path

import numpy as np

import sfcpart
from sfcpart.files.series.hdf5_series import write_series
from tools.series.front import front_series

MESH = "meshes/channel_mixed.vtu"
N_CELLS = 2784
COSTS = {"cell": 2e-6, "face": 5e-7}


def write_times(*, parts: str = "parts", seconds: str = "times.csv", n_steps: int = 2) -> None:
    """Write what ranks would take with some parts; counts.csv and measured.csv as well."""
    from sfcpart.cli.inputs import partition_from_path

    partition = partition_from_path(parts, N_CELLS)
    counts = _counts(partition.cell_part.tobytes(), partition.n_parts)
    exact = sum(COSTS[name] * values for name, values in counts.items())
    noise = 1 + 1e-3 * np.random.default_rng(0).standard_normal((n_steps, partition.n_parts))
    rows = [(s, r, t) for (s, r), t in np.ndenumerate(exact * noise)]
    lines = [f"{step},{rank},{time:.17g}" for step, rank, time in rows]
    Path(seconds).write_text("\n".join(["step,rank,seconds", *lines]) + "\n")
    both = [",".join(f"{values[rank]:g}" for values in counts.values()) for _, rank, _ in rows]
    head = "step,rank,seconds,cell,face"
    joined = [f"{line},{more}" for line, more in zip(lines, both, strict=True)]
    Path("measured.csv").write_text("\n".join([head, *joined]) + "\n")
    Path("counts.csv").write_text("\n".join(["cell,face", *both[: partition.n_parts]]) + "\n")


@cache
def _mesh() -> sfcpart.Mesh:
    """Read the mesh once for all tests."""
    return sfcpart.read_mesh(MESH)


@cache
def _counts(cell_part: bytes, n_parts: int):
    """Count cells and faces of the parts, once for each partition."""
    parts = sfcpart.Partition.from_array(np.frombuffer(cell_part, np.int32), n_parts)
    return sfcpart.class_counts(_mesh(), parts, by=list(COSTS))


def write_runs() -> None:
    """Write a small front as front.h5 and a folder of weights of the mixed channel."""
    write_series("front.h5", front_series(4, n_levels=1, n_frames=6))
    Path("weights").mkdir(exist_ok=True)
    centers = _mesh().centers
    for step in range(4):
        hot = np.exp(-(((centers[:, 0] - 10.0 * step) / 5.0) ** 2))
        np.save(f"weights/step_{step}.npy", 1.0 + 20.0 * hot)
