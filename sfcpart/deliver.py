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
from sfcpart.files.parts.folder import check_output_folder, output_folder
from sfcpart.files.parts.tables import write_cell_part, write_part_table, write_summary

if TYPE_CHECKING:
    from sfcpart.dtypes import Array
    from sfcpart.graph import CellGraph
    from sfcpart.halo import Across, Halo
    from sfcpart.measure import Assessment
    from sfcpart.mesh.mesh import Mesh
    from sfcpart.partition import Partition
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
    mesh: Mesh,
    partition: Partition,
    *,
    assessment: Assessment,
    graph: CellGraph | None,
    how: Delivery,
    source: Path | None,
    options: Mapping[str, Any],
    more: Callable[[Path], Mapping[str, Any]] = lambda place: {},
    page: Callable[[Page], Page] = lambda page: page,
) -> Path:
    """Write the folder and return where it is.

    `more` writes further files into the folder and returns what the summary tells about them;
    `page` turns the report page of the split into that of what is delivered.
    """
    _check_formats(how.formats, source)
    target = check_output_folder(folder, overwrite=how.overwrite)
    digest = "" if source is None else file_digest(source)
    with output_folder(target, overwrite=how.overwrite) as place:
        _write_parts(place, mesh, partition, graph=graph, how=how, source=source, digest=digest)
        write_cell_part(place / "cell_part.npy", partition)
        write_part_table(place / "parts.csv", _columns(assessment))
        title = how.title if how.title is not None else "" if source is None else source.name
        if how.picture:
            _draw(place, mesh, partition, assessment=assessment, graph=graph, title=title)
        if how.report:
            _report(
                place / "report.html",
                mesh,
                partition,
                assessment=assessment,
                graph=graph,
                title=title,
                options=options,
                turn=page,
            )
        summary = _summary(mesh, assessment, source=source, digest=digest, options=options)
        write_summary(place / "summary.json", {**summary, **more(place)})
    return target


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
    mesh: Mesh,
    partition: Partition,
    *,
    graph: CellGraph | None,
    how: Delivery,
    source: Path | None,
    digest: str,
) -> None:
    """Write the parts in each format asked for."""
    if "same" in how.formats:
        from sfcpart.files.meshes.own_format import write_in_own_format

        assert source is not None
        write_in_own_format(_own_place(place, source), source, {"part": partition.cell_part})
    if how.formats == ("same",):
        return
    halo = _halo(mesh, graph, partition, how)
    if "vtu" in how.formats:
        from sfcpart.files.parts.vtu import write_vtu_pieces

        write_vtu_pieces(place, mesh, partition=partition, halo=halo, input_digest=digest)
    if "vtkhdf" in how.formats:
        from sfcpart.files.parts.vtkhdf_write import write_vtkhdf

        write_vtkhdf(
            place / "parts.vtkhdf",
            mesh,
            partition=partition,
            halo=halo,
            compress=how.compress,
            input_digest=digest,
        )


def _own_place(place: Path, source: Path) -> Path:
    """Name the copy of the input; `parts.vtkhdf` is the file a solver loads."""
    suffix = source.suffix
    return place / (f"mesh{suffix}" if suffix.lower() == ".vtkhdf" else f"parts{suffix}")


def _halo(mesh: Mesh, graph: CellGraph | None, partition: Partition, how: Delivery) -> Halo:
    """Build the exchange lists; bare centres have no neighbours and so no halo."""
    from sfcpart.halo import build_halo

    layers = how.layers if graph is not None else 0
    return build_halo(mesh, graph, partition, layers=layers, across=how.across)


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
    mesh: Mesh,
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
            "n_cells": mesh.n_cells,
            "n_points": mesh.n_points,
            "dim": mesh.dim,
        },
        "options": dict(options),
        **assessment.to_json_dict(),
    }
