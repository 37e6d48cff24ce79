"""Turn sums into the figures of `columns`: by part, then in total.

Cost: linear in parts and pairs of parts.
"""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from sfcpart.comm.base import Comm
from sfcpart.dtypes import Array, FloatArray, Int64Array
from sfcpart.measure.assessment import Number
from sfcpart.measure.bounds import least_imbalance, least_surface_measure
from sfcpart.measure.columns import PART_COLUMNS
from sfcpart.measure.gate import Given
from sfcpart.measure.pairs import PartPairs
from sfcpart.measure.step_model import StepTime
from sfcpart.measure.sums import CellSums, FaceSums

__all__ = ["part_figures", "total_figures"]


def part_figures(
    sums: CellSums,
    given: Given,
    *,
    stretch: FloatArray,
    flat_dim: int | None,
    time: StepTime | None,
    comm: Comm,
) -> dict[str, Array | None]:
    """Return the column of every name in `PART_COLUMNS` (collective).

    `flat_dim` is the dimension of a planar or solid mesh, None for curved surfaces.
    """
    part: dict[str, Array | None] = dict.fromkeys(column.name for column in PART_COLUMNS)
    part |= {
        "part": np.arange(len(sums.cells), dtype=np.int32),
        "cells": sums.cells,
        "weight": sums.weight,
        "speed": given.speed,
        "load": _load(sums.weight, given.speed),
        "load_unweighted": _load(sums.cells.astype(np.float64), given.speed),
        "measure": sums.measure,
        "stretch": stretch,
    }
    if given.part_limit is not None:
        part |= {
            "limit_weight": sums.limit_weight,
            "limit_share": sums.limit_weight / given.part_limit,
        }
    if sums.faces is not None:
        part |= _face_columns(sums, sums.faces, flat_dim, comm)
    if time is not None:
        part["step_seconds"] = time.work + time.exchange
    return part


def _face_columns(
    sums: CellSums, faces: FaceSums, flat_dim: int | None, comm: Comm
) -> dict[str, Array]:
    """Return the columns that need faces."""
    surface = faces.cut_measure + faces.boundary_measure
    columns = {
        "cut_faces": faces.cut_faces,
        "cut_measure": faces.cut_measure,
        "boundary_faces": faces.boundary_faces,
        "boundary_measure": faces.boundary_measure,
        **_pair_columns(faces.pairs, len(sums.cells), comm),
        "pieces": faces.pieces,
        "stray_cells": sums.cells - faces.largest_piece,
        "surface": surface,
        "faces_to_cells": _ratio(faces.cut_faces + faces.boundary_faces, sums.cells),
    }
    if sums.measure is not None:
        columns["surface_to_measure"] = _ratio(surface, sums.measure)
    if sums.measure is not None and flat_dim is not None:
        least = least_surface_measure(sums.measure, dim=flat_dim)
        columns["surface_ratio"] = _ratio(surface, least)
    return columns


def _pair_columns(pairs: PartPairs, n_parts: int, comm: Comm) -> dict[str, Array]:
    """Return the columns that follow from pairs; each rank has those of its parts."""
    whole = np.stack(
        [
            _whole_sums(pairs.part, pairs.received_cells, n_parts),
            _whole_sums(pairs.part, pairs.sent_cells, n_parts),
            np.bincount(pairs.part, minlength=n_parts),
            _smallest_interface(pairs.part, pairs.faces, n_parts),
        ]
    )
    names = ("halo_cells", "sent_cells", "neighbours", "smallest_interface")
    return dict(zip(names, comm.allreduce(whole), strict=True))


def _load(weight: FloatArray, speed: FloatArray) -> FloatArray:
    """Return the weight of each part over the fair share of its speed (NaN if all weigh 0)."""
    return _ratio(weight, speed * (weight.sum() / speed.sum()))


def _ratio(above: Array, below: Array) -> FloatArray:
    """Divide, NaN where the divisor is not positive."""
    ratio = np.full(len(above), np.nan)
    with np.errstate(invalid="ignore"):  # of infinite measures
        np.divide(above, below, out=ratio, where=below > 0)
    return ratio


def _whole_sums(part: Array, values: Int64Array, n_parts: int) -> Int64Array:
    """Add whole numbers by part, exactly."""
    total = np.zeros(n_parts, np.int64)
    np.add.at(total, part, values)
    return total


def _smallest_interface(part: Array, faces: Int64Array, n_parts: int) -> Int64Array:
    """Return the fewest faces each part shares with a neighbour, 0 without neighbours."""
    most = np.iinfo(np.int64).max
    least = np.full(n_parts, most)
    np.minimum.at(least, part, faces)
    return np.where(least == most, 0, least)


def total_figures(
    part: Mapping[str, Array | None], sums: CellSums, given: Given, *, time: StepTime | None
) -> dict[str, Number]:
    """Return the totals that follow from the columns; bounds on the cut come on top."""
    cells = _column(part, "cells")
    total: dict[str, Number] = {
        "n_parts": len(cells),
        "n_cells": int(cells.sum()),
        "weight": float(_column(part, "weight").sum()),
        "measure": None if part["measure"] is None else float(part["measure"].sum()),
        "imbalance": _excess(_column(part, "load")),
        "imbalance_unweighted": _excess(_column(part, "load_unweighted")),
        "limit_share": None if part["limit_share"] is None else _worst(part["limit_share"]),
        "n_empty_parts": int((cells == 0).sum()),
        "stretch_max": _worst(_column(part, "stretch")),
    }
    total |= _least_imbalances(sums, given, float(_column(part, "weight").sum()))
    if part["cut_faces"] is not None:
        total |= _face_totals(part)
    if time is not None:
        total |= {
            "step_seconds": time.total,
            "exchange_share": time.exchange_share,
            "speed_up": time.speed_up,
            "efficiency": time.efficiency,
        }
    return total


def _face_totals(part: Mapping[str, Array | None]) -> dict[str, Number]:
    """Return the totals that need faces."""
    has_cells = _column(part, "cells") > 0
    neighbours, interface = _column(part, "neighbours"), _column(part, "smallest_interface")
    halo, pieces = _column(part, "halo_cells"), _column(part, "pieces")
    total: dict[str, Number] = {
        "cut_faces": int(_column(part, "cut_faces").sum()) // 2,
        "cut_measure": float(_column(part, "cut_measure").sum()) / 2,
        "halo_cells": int(halo.sum()),
        "halo_cells_max": int(halo.max()),
        "neighbours_max": int(neighbours.max()),
        "neighbours_mean": float(neighbours[has_cells].mean()),
        "smallest_interface": int(interface[interface > 0].min(initial=np.iinfo(np.int64).max)),
        "n_split_parts": int((pieces > 1).sum()),
        "pieces_max": int(pieces.max()),
        "stray_cells": int(_column(part, "stray_cells").sum()),
    }
    if not neighbours.any():
        total["smallest_interface"] = 0
    ratio = part["surface_ratio"]
    if ratio is not None and np.isfinite(ratio).any():
        total["surface_ratio_mean"] = float(np.nanmean(ratio))
        total["surface_ratio_max"] = _worst(ratio)
    return total


def _least_imbalances(sums: CellSums, given: Given, weight: float) -> dict[str, Number]:
    """Return how well the cells could be balanced over these ranks."""
    n_cells = int(sums.cells.sum())
    equal = least_imbalance(n_cells, given.speed, heaviest=1.0, is_equal=True)
    if given.weight is None:
        return {"least_imbalance": equal, "least_imbalance_unweighted": equal}
    least = least_imbalance(weight, given.speed, heaviest=sums.heaviest, is_equal=sums.is_equal)
    known = least if weight > 0 else None
    return {"least_imbalance": known, "least_imbalance_unweighted": equal}


def _column(part: Mapping[str, Array | None], name: str) -> Array:
    """Return a column that is known."""
    column = part[name]
    assert column is not None
    return column


def _excess(load: Array) -> float | None:
    """Return the largest load - 1, which rounding cannot bring below 0."""
    worst = _worst(load)
    return None if worst is None else max(worst - 1.0, 0.0)


def _worst(values: Array) -> float | None:
    """Return the largest value there is."""
    known = values[np.isfinite(values)]
    return float(known.max()) if len(known) else None
