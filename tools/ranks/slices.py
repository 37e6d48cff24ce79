"""Count what the pieces that work on slices cost a rank, on virtual ranks.

    python tools/ranks/slices.py [--ranks 8 27 64] [--cells 500] [--parts 8]

A box of tetrahedra lies in slices on virtual ranks (threads of this process), `--cells` cells
each and `--parts` parts a rank; a communicator counts (`counted.py`). Told are, for the busiest
rank: rounds, the bytes of collectives (which do not depend on the slice) and those of rows (which
go with the surface of the slice, and with its cells where cells go to the owners of their parts).
"""

from __future__ import annotations

import argparse
from collections.abc import Callable
from typing import Any

import numpy as np
from counted import Counted

from sfcpart.comm import run_ranks
from sfcpart.halo import build_halo_slice
from sfcpart.measure import assess_slice
from sfcpart.measure.survey import survey_slice
from sfcpart.mesh.mesh import Mesh
from sfcpart.mesh.shapes import jittered_tets
from sfcpart.partition import Partition
from sfcpart.slices.graph_slice import graph_slice
from sfcpart.slices.mesh_slice import cut_mesh
from sfcpart.slices.pieces import number_pieces
from sfcpart.weights import groups_from_pairs


def box(n_cells: int) -> Mesh:
    """Make a box of about so many tetrahedra."""
    shape = jittered_tets((max(2, round((n_cells / 6) ** (1 / 3)) + 1),) * 3)
    return Mesh.from_arrays(shape.points, shape.cells)


def count(mesh: Mesh, n_parts: int, comm: Any) -> dict[str, tuple[int, int, int]]:
    """Run every piece on this rank; return rounds, bytes of collectives and of rows."""
    found: dict[str, tuple[int, int, int]] = {}

    def run(name: str, make: Callable[[], Any]) -> Any:
        counted.rounds.clear()
        counted.bytes.clear()
        made = make()
        rows = sum(counted.bytes[kind] for kind in ("rows", "rows sent", "rows received"))
        found[name] = (counted.rounds.total(), counted.bytes.total() - rows, rows)
        return made

    counted = Counted(comm)
    held = cut_mesh(mesh, counted)
    part = Partition.from_array(held.cell_gid * n_parts // held.n_cells, n_parts)
    pairs = np.stack([held.cell_gid, (held.cell_gid * 7 + 3) % held.n_cells], axis=1)[::8]
    graph = run("cell graph", lambda: graph_slice(held))
    run("pieces", lambda: number_pieces(graph))
    run("assessment", lambda: assess_slice(held, graph, part))
    run("exchange lists", lambda: build_halo_slice(held, graph, part))
    run("look-over", lambda: survey_slice(held, graph))
    run("groups of pairs", lambda: groups_from_pairs(pairs, held=held))
    return found


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--ranks", type=int, nargs="*", default=[8, 27, 64])
    parser.add_argument("--cells", type=int, default=500, help="a rank")
    parser.add_argument("--parts", type=int, default=8, help="a rank")
    given = parser.parse_args()
    print("a rank, at most      ranks  parts   cells | rounds  collectives     rows, bytes")
    for size in given.ranks:
        mesh, n_parts = box(size * given.cells), size * given.parts
        ranks = run_ranks(size, lambda comm: count(mesh, n_parts, comm), timeout=900)  # noqa: B023
        for name in ranks[0]:
            most = [max(rank[name][k] for rank in ranks) for k in range(3)]
            print(
                f"{name:20s} {size:5d} {n_parts:6d} {mesh.n_cells:7d} | {most[0]:6d} "
                f"{most[1]:12d} {most[2]:11d}"
            )


if __name__ == "__main__":
    main()
