"""The figures of a partition by sets and loops: slow and obvious."""

from __future__ import annotations

from sfcpart.graph import CellGraph

__all__ = ["figures_by_sets"]


def figures_by_sets(graph: CellGraph, cell_part: list[int], n_parts: int) -> dict[str, list[float]]:
    """Return the columns that need faces, one list of n_parts each."""
    rows = [
        list(zip(graph.indices[a:b].tolist(), graph.data[a:b].tolist(), strict=True))
        for a, b in zip(graph.indptr[:-1].tolist(), graph.indptr[1:].tolist(), strict=True)
    ]
    names = [
        "cells",
        "cut_faces",
        "cut_measure",
        "boundary_faces",
        "boundary_measure",
        "halo_cells",
        "sent_cells",
        "neighbours",
        "smallest_interface",
        "pieces",
        "stray_cells",
        "surface",
    ]
    figures: dict[str, list[float]] = {name: [0] * n_parts for name in names}
    for p in range(n_parts):
        own = {i for i, q in enumerate(cell_part) if q == p}
        cut = [(i, j, m) for i in own for j, m in rows[i] if j not in own]
        others = {cell_part[j] for _, j, _ in cut}
        pieces = _pieces(own, rows)
        by_name = {
            "cells": len(own),
            "cut_faces": len(cut),
            "cut_measure": sum(m for _, _, m in cut),
            "boundary_faces": sum(int(graph.boundary_count[i]) for i in own),
            "boundary_measure": sum(float(graph.boundary_measure[i]) for i in own),
            "halo_cells": len({j for _, j, _ in cut}),
            "sent_cells": len({(i, cell_part[j]) for i, j, _ in cut}),
            "neighbours": len(others),
            "smallest_interface": min(
                (sum(cell_part[j] == q for _, j, _ in cut) for q in others), default=0
            ),
            "pieces": len(pieces),
            "stray_cells": len(own) - max(map(len, pieces), default=0),
        }
        by_name["surface"] = by_name["cut_measure"] + by_name["boundary_measure"]
        for name, value in by_name.items():
            figures[name][p] = value
    return figures


def _pieces(own: set[int], rows: list[list[tuple[int, float]]]) -> list[set[int]]:
    """Flood each piece."""
    left, pieces = set(own), []
    while left:
        piece, front = set(), {left.pop()}
        while front:
            piece |= front
            front = {j for i in front for j, _ in rows[i] if j in own} - piece
        left -= piece
        pieces.append(piece)
    return pieces
