"""A solver that loads its parts and exchanges halos gets the answer of one that does neither."""

from __future__ import annotations

import numpy as np
import pytest

from sfcpart.files.parts.vtkhdf_write import write_vtkhdf
from sfcpart.graph import cell_graph
from tests.mpi.harness import run_job
from tests.mpi.solver_job import STEPS, flux_sum
from tests.parted import SAMPLES, sliced


@pytest.mark.parametrize("across", ["faces", "points"])
def test_diffusion_on_four_ranks(tmp_path, across):
    mesh = SAMPLES["mixed"]()
    graph, measure = cell_graph(mesh), mesh.measures
    start = np.sin(np.arange(mesh.n_cells))
    row = np.repeat(np.arange(mesh.n_cells), np.diff(graph.indptr))
    step = 0.5 / (np.bincount(row, graph.data) / measure).max()
    mesh = mesh.with_cell_field("start", start)
    mesh = mesh.with_cell_field("step", np.full(mesh.n_cells, step))
    case = sliced(mesh, n_parts=4, across=across)
    write_vtkhdf(tmp_path / "parts.vtkhdf", case.mesh, partition=case.partition, halo=case.halo)
    run_job("tests.mpi.solver_job", 4, tmp_path)
    wanted = start.copy()
    for _ in range(STEPS):
        wanted += step * flux_sum(graph, wanted, measure)
    found = np.full(mesh.n_cells, np.nan)
    for rank in range(4):
        with np.load(tmp_path / f"rank{rank}.npz") as seen:
            found[seen["gid"]] = seen["value"]
    assert np.abs(wanted - start).max() > 0.1
    assert np.allclose(found, wanted, rtol=0, atol=1e-12)  # sums in another order
