"""Write what a split leaves behind into one folder: parts, lists, tables, summary, report."""

from __future__ import annotations

import hashlib
import platform
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from os import PathLike
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from sfcpart import __version__
from sfcpart.errors import InputError
from sfcpart.files.parts.folder import check_output_folder, shared_folder
from sfcpart.files.parts.tables import write_cell_part, write_part_table, write_summary
from sfcpart.graph import CellGraph, cell_graph
from sfcpart.partition import Partition
from sfcpart.slices.gate import agreed
from sfcpart.slices.gathering import gather_mesh
from sfcpart.slices.graph_slice import GraphSlice
from sfcpart.slices.mesh_slice import MeshSlice
from sfcpart.slices.routing import gather_rows

if TYPE_CHECKING:
    from sfcpart.comm.base import Comm
    from sfcpart.dtypes import Array, Int32Array
    from sfcpart.halo import Across
    from sfcpart.measure import Assessment
    from sfcpart.mesh.mesh import Mesh
    from sfcpart.report.page import Page

__all__ = ["FORMATS", "Delivery", "deliver", "file_digest"]

FORMATS = ("vtkhdf", "vtu", "same")
_BLOCK = 1 << 22


@dataclass(frozen=True)
class Delivery:
    """How parts are written; the meanings are those of `sfcpart.write_split`."""

    formats: tuple[str, ...]
    layers: int
    across: Across
    overwrite: bool
    picture: bool
    compress: bool
    title: str | None = None
    report: bool = False


def deliver(
    folder: str | PathLike[str],
    mesh: Mesh | MeshSlice,
    partition: Partition,
    *,
    assessment: Assessment,
    graph: CellGraph | GraphSlice | None,
    how: Delivery,
    source: Path | None,
    options: Mapping[str, Any],
    more: Callable[[Path], Mapping[str, Any]] = lambda place: {},
    page: Callable[[Page], Page] = lambda page: page,
) -> Path:
    """Write the folder and return where it is (collective with several ranks).

    `more` writes further files into the folder and returns what the summary tells about them;
    `page` turns the report page of the split into that of what is delivered. Both are called on
    rank 0.
    """
    held = mesh if isinstance(mesh, MeshSlice) else MeshSlice.whole(mesh)
    rows = GraphSlice.whole(graph) if isinstance(graph, CellGraph) else graph
    comm = held.comm
    _check_formats(how.formats, source)
    target = agreed(comm, lambda: check_output_folder(folder, overwrite=how.overwrite))
    digest = _digest_for_all(source, comm)
    with shared_folder(target, overwrite=how.overwrite, comm=comm) as place:
        _write_parts(place, held, partition, graph=rows, how=how, source=source, digest=digest)
        write_cell_part(place / "cell_part.npy", partition, comm=comm)
        title = how.title if how.title is not None else "" if source is None else source.name
        about = {"assessment": assessment, "title": title, "options": options, "page": page}
        if how.picture or how.report:
            _show(place, held, partition, graph=graph, how=how, about=about)
        summary = _summary(held, assessment, source=source, digest=digest, options=options)
        agreed(comm, lambda: _write_tables(place, assessment, summary, more, comm))
    return target


def _digest_for_all(source: Path | None, comm: Comm) -> str:
    """Return the digest of the input, which rank 0 reads."""
    if source is None:
        return ""
    made = agreed(comm, lambda: file_digest(source) if comm.rank == 0 else "")
    return str(comm.bcast_object(made))


def _write_tables(
    place: Path,
    assessment: Assessment,
    summary: Mapping[str, Any],
    more: Callable[[Path], Mapping[str, Any]],
    comm: Comm,
) -> None:
    """Write figures, on rank 0."""
    if comm.rank == 0:
        write_part_table(place / "parts.csv", _columns(assessment))
        write_summary(place / "summary.json", {**summary, **more(place)})


def _show(
    place: Path,
    held: MeshSlice,
    partition: Partition,
    *,
    graph: CellGraph | GraphSlice | None,
    how: Delivery,
    about: Mapping[str, Any],
) -> None:
    """Draw the picture and write the report page, on rank 0, which gathers the mesh for it."""
    whole = gather_mesh(held)
    cell_part = gather_rows(held.comm, partition.cell_part)
    agreed(held.comm, lambda: _shown(place, whole, cell_part, partition.n_parts, graph, how, about))


def _shown(
    place: Path,
    mesh: Mesh | None,
    cell_part: Int32Array,
    n_parts: int,
    graph: CellGraph | GraphSlice | None,
    how: Delivery,
    about: Mapping[str, Any],
) -> None:
    """Draw and write what shows the whole mesh."""
    if mesh is None:
        return
    known = graph if graph is None or isinstance(graph, CellGraph) else cell_graph(mesh)
    partition = Partition.from_array(cell_part, n_parts)
    common = {"assessment": about["assessment"], "graph": known, "title": about["title"]}
    if how.picture:
        _draw(place, mesh, partition, **common)
    if how.report:
        path, options = place / "report.html", about["options"]
        _report(path, mesh, partition, **common, options=options, turn=about["page"])


def _check_formats(formats: tuple[str, ...], source: Path | None) -> None:
    """Refuse unknown formats, none, and the input's own without the input."""
    unknown = [name for name in formats if name not in FORMATS]
    if unknown or not formats:
        found = repr(unknown[0]) if unknown else "none"
        raise InputError(f"the output format is {found}; wanted one of {', '.join(FORMATS)}")
    if "same" in formats and source is None:
        raise InputError("the input's own format was asked for without its file; give `source`")


def file_digest(path: Path) -> str:
    """Return the SHA-256 of a file as "sha256:...", read in blocks."""
    digest = hashlib.sha256()
    with path.open("rb") as file:
        while block := file.read(_BLOCK):
            digest.update(block)
    return f"sha256:{digest.hexdigest()}"


def _write_parts(
    place: Path,
    held: MeshSlice,
    partition: Partition,
    *,
    graph: GraphSlice | None,
    how: Delivery,
    source: Path | None,
    digest: str,
) -> None:
    """Write the parts in each format asked for."""
    if "same" in how.formats:
        assert source is not None
        cell_part = gather_rows(held.comm, partition.cell_part)
        agreed(held.comm, lambda: _write_same(place, source, cell_part, held.comm))
    if how.formats == ("same",):
        return
    from sfcpart.halo import build_halo_slice

    # bare centres have no neighbours and so no halo
    layers = how.layers if graph is not None else 0
    halo = build_halo_slice(held, graph, partition, layers=layers, across=how.across)
    if "vtu" in how.formats:
        from sfcpart.files.parts.vtu import write_vtu_pieces

        write_vtu_pieces(place, held, partition=partition, halo=halo, input_digest=digest)
    if "vtkhdf" in how.formats:
        from sfcpart.files.parts.vtkhdf_write import write_vtkhdf

        write_vtkhdf(
            place / "parts.vtkhdf",
            held,
            partition=partition,
            halo=halo,
            compress=how.compress,
            input_digest=digest,
        )


def _write_same(place: Path, source: Path, cell_part: Int32Array, comm: Comm) -> None:
    """Write a copy of the input with the parts, on rank 0, which gathers them."""
    if comm.rank == 0:
        from sfcpart.files.meshes.own_format import write_in_own_format

        write_in_own_format(_own_place(place, source), source, {"part": cell_part})


def _own_place(place: Path, source: Path) -> Path:
    """Name the copy of the input; `parts.vtkhdf` is the file a solver loads."""
    suffix = source.suffix
    return place / (f"mesh{suffix}" if suffix.lower() == ".vtkhdf" else f"parts{suffix}")


def _draw(
    place: Path,
    mesh: Mesh,
    partition: Partition,
    *,
    assessment: Assessment,
    graph: CellGraph | None,
    title: str,
) -> None:
    """Draw the split."""
    from sfcpart.report.picture import draw_split

    draw_split(
        place / "parts.png",
        mesh,
        partition=partition,
        graph=graph,
        title=title,
        figures=assessment.total,
    )


def _report(
    path: Path,
    mesh: Mesh,
    partition: Partition,
    *,
    assessment: Assessment,
    graph: CellGraph | None,
    title: str,
    options: Mapping[str, Any],
    turn: Callable[[Page], Page],
) -> None:
    """Write the report page."""
    from sfcpart.report.page import split_page, write_page

    page = split_page(
        mesh,
        partition,
        assessment=assessment,
        graph=graph,
        title=title,
        levels=options.get("levels"),
        options=options,
    )
    write_page(path, turn(page))


def _columns(assessment: Assessment) -> dict[str, Array]:
    """Return the columns by part; what cannot be known is NaN, an empty field in the table."""
    unknown = np.full(assessment.n_parts, np.nan)
    return {name: unknown if column is None else column for name, column in assessment.part.items()}


def _summary(
    held: MeshSlice,
    assessment: Assessment,
    *,
    source: Path | None,
    digest: str,
    options: Mapping[str, Any],
) -> dict[str, Any]:
    """Collect versions, options, input and figures."""
    return {
        "sfcpart": __version__,
        "python": platform.python_version(),
        "numpy": np.__version__,
        "input": {
            "path": None if source is None else str(source),
            "digest": digest or None,
            "n_cells": held.n_cells,
            "n_points": held.n_points,
            "dim": held.mesh.dim,
        },
        "options": dict(options),
        **assessment.to_json_dict(),
    }
