"""The job of `test_slices.py`: everything that is known of meshes that lie in slices on ranks."""

from __future__ import annotations

import sys
from pathlib import Path
from typing import Any

import numpy as np

from sfcpart.comm import world
from sfcpart.halo import build_halo_slice
from sfcpart.measure import assess_slice
from sfcpart.measure.survey import survey_slice
from sfcpart.mesh.mesh import Mesh
from sfcpart.partition import Partition
from sfcpart.slices.graph_slice import graph_slice
from sfcpart.slices.mesh_slice import MeshSlice, cut_mesh
from sfcpart.slices.pieces import number_pieces
from sfcpart.weights import groups_from_boundaries, groups_from_pairs
from tests.strategies import grid
from tests.unit.test_weights import with_sides

N_PARTS = 5


def _sides() -> Mesh:
    """Make a lattice with boundary groups and fields."""
    mesh = with_sides((6, 3, 2))
    return mesh.with_cell_field("heat", np.linspace(-1, 2, mesh.n_cells) / 3)


MESHES = {
    "tets": lambda: grid((4, 3, 3), simplices=True),
    "sides": _sides,
    "few": lambda: Mesh.from_faces([[0, 1]], [0.1], [[0, 0], [1, 0]], [0.3, 0.7]),
}


def seen(held: MeshSlice) -> dict[str, Any]:
    """Return rows of this rank (arrays), and what all ranks know alike (texts)."""
    graph = graph_slice(held)
    part = Partition.from_array(held.cell_gid * N_PARTS // held.n_cells, N_PARTS)
    halo = build_halo_slice(held, graph, part, layers=2)
    figures = assess_slice(held, graph, part, weights=1.0 + held.cell_gid % 3 / 7)
    pairs = np.stack([np.arange(held.n_cells - 2), np.arange(2, held.n_cells)], axis=1)
    mine = pairs[held.comm.rank :: held.comm.size]
    rows = {
        "degree": np.diff(graph.indptr),
        "neighbours": graph.gid_of(graph.indices),
        "measures": graph.data,
        "boundary": graph.boundary_measure,
        "piece": number_pieces(graph)[1],
        "owned": halo.owned,
        "halo": halo.halo,
        "send": halo.send,
        "pairs": groups_from_pairs(mine, held=held),
    }
    if held.mesh.points is not None:
        across = build_halo_slice(held, graph, part, across="points")
        rows |= {"halo across points": across.halo}
    if held.mesh.boundary:
        rows["periodic"] = groups_from_boundaries(held, ("inflow", "outflow"))
    survey = survey_slice(held, graph)
    return {**rows, "figures": repr(figures.to_json_dict()), "survey": repr(survey.to_json_dict())}


def main() -> None:
    comm = world()
    joined: dict[str, Any] = {}
    for name, make in MESHES.items():
        for key, value in seen(cut_mesh(make(), comm)).items():
            texts = comm.allgather(np.array([value])) if isinstance(value, str) else None
            if texts is not None:
                assert len({str(text[0]) for text in texts}) == 1
                joined[f"{name} {key}"] = texts[0]
            else:
                joined[f"{name} {key}"] = np.concatenate(comm.allgather(value))
    if comm.rank == 0:
        np.savez(Path(sys.argv[1]) / "seen.npz", **joined)


if __name__ == "__main__":
    main()
