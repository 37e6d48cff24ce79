"""The job of `test_solver.py`: one rank a part loads its part, steps and exchanges halos."""

from __future__ import annotations

import sys
from pathlib import Path

import numpy as np

STEPS = 20


def flux_sum(graph, value: np.ndarray, measure: np.ndarray) -> np.ndarray:
    """Return what flows into each cell over its faces, by difference and face measure."""
    row = np.repeat(np.arange(graph.n_cells), np.diff(graph.indptr))
    flow = graph.data * (value[graph.indices] - value[row])
    return np.bincount(row, flow, minlength=graph.n_cells) / measure


def main() -> None:
    from mpi4py import MPI  # not above: pytest imports this module when it looks for doctests

    from sfcpart.files.parts.part import read_part
    from sfcpart.graph import cell_graph
    from sfcpart.mesh.mesh import Mesh

    world, folder = MPI.COMM_WORLD, Path(sys.argv[1])
    part = read_part(folder, world.rank)
    local = Mesh.from_cells(part.points, part.kind, part.indptr, part.indices)
    graph, measure = cell_graph(local), local.measures
    value = np.zeros(part.n_cells)
    value[: part.n_owned] = part.cell_fields["start"][: part.n_owned]
    step = float(part.cell_fields["step"][0])
    for _ in range(STEPS):
        exchange(world, part, value)
        value[: part.n_owned] += step * flux_sum(graph, value, measure)[: part.n_owned]
    owned = slice(0, part.n_owned)
    np.savez(folder / f"rank{world.rank}.npz", gid=part.cell_gid[owned], value=value[owned])


def exchange(world, part, value: np.ndarray) -> None:
    """Bring the values of owned cells into the halos of the neighbours."""
    came = [np.empty(len(part.receive_list(other))) for other in part.neighbour]
    waiting = [world.Irecv(box, other) for box, other in zip(came, part.neighbour, strict=True)]
    for other in part.neighbour:
        world.Send(value[part.send_list(other)], other)
    for request, box, other in zip(waiting, came, part.neighbour, strict=True):
        request.Wait()
        value[part.receive_list(other)] = box


if __name__ == "__main__":
    main()
