"""True weights from measurement: count classes of cells, fit their costs, keep them in a file."""

from __future__ import annotations

import os
from collections.abc import Sequence
from os import PathLike
from pathlib import Path

import numpy as np
from numpy.typing import ArrayLike

from sfcpart.dtypes import FloatArray
from sfcpart.errors import FileError, PartitionError
from sfcpart.files.parts.tables import json_text
from sfcpart.files.weights_file import cost_file_content
from sfcpart.graph import cell_graph
from sfcpart.mesh.mesh import Mesh
from sfcpart.partition import Partition
from sfcpart.weights.classes import count_classes
from sfcpart.weights.fit import fit_weights
from sfcpart.weights.fitted import WeightFit

__all__ = ["class_counts", "fit_weights", "write_costs"]


def class_counts(
    mesh: Mesh, partition: Partition | ArrayLike, *, by: str | Sequence[str] = "kind"
) -> dict[str, FloatArray]:
    """Count how many cells of each class every part holds: what `fit_weights` explains times by.

    Parameters
    ----------
    mesh : Mesh
    partition : Partition or (n_cells,) integers
    by : str or sequence of str
        "kind" (kinds of cells), "cell", "face" (faces of cells), "rank" (1 a part), the name of a
        cell field whose values are classes, or "sum:FIELD" (an amount, such as particles).

    Returns
    -------
    dict of str to (n_parts,) float64
        By class: `tetra`, `cell`, `face`, `rank`, `FIELD:VALUE`, `sum:FIELD`.

    Raises
    ------
    PartitionError
        If the partition is not of this mesh.
    InputError, WeightError
        If a field is missing or holds no classes.

    Examples
    --------
    >>> import sfcpart
    >>> points = [[0, 0], [2, 0], [2, 1], [0, 1], [3, 0]]
    >>> cells = {"quad": [[0, 1, 2, 3]], "triangle": [[1, 4, 2]]}
    >>> mesh = sfcpart.Mesh.from_arrays(points, cells)
    >>> {name: count.tolist() for name, count in sfcpart.class_counts(mesh, [0, 1]).items()}
    {'triangle': [0.0, 1.0], 'quad': [1.0, 0.0]}
    """
    parts = partition if isinstance(partition, Partition) else Partition.from_array(partition)
    if parts.n_cells != mesh.n_cells:
        raise PartitionError(
            f"the partition has {parts.n_cells} cells, the mesh {mesh.n_cells}; wanted the same"
        )
    return count_classes(
        mesh,
        np.asarray(parts.cell_part),
        n_parts=parts.n_parts,
        by=by,
        graph=lambda: cell_graph(mesh),
    )


def write_costs(path: str | PathLike[str], fit: WeightFit) -> None:
    """Write fitted costs to a file that stands wherever weights do (`weights="costs.json"`).

    Parameters
    ----------
    path : path
        Ends in .json; replaced in one step if it exists.
    fit : WeightFit

    Raises
    ------
    WeightError
        If a class is none that cells can have, or all costs are 0.
    FileError
        If the file cannot be written or is not called .json.

    Examples
    --------
    >>> import sfcpart, tempfile
    >>> fit = sfcpart.fit_weights([2.0, 4.0], {"cell": [10, 20]})
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     sfcpart.write_costs(f"{folder}/costs.json", fit)
    """
    text = json_text(cost_file_content(fit))
    place = Path(path)
    if place.suffix.lower() != ".json":
        raise FileError(f"{place}: a file of costs must end in .json to be known as one")
    beside = place.with_name(f".{place.name}.{os.getpid()}.tmp")
    try:
        with beside.open("w", encoding="utf-8") as file:
            file.write(text)
            file.flush()
            os.fsync(file.fileno())
        beside.replace(place)
    except OSError as error:
        raise FileError(f"{place}: cannot be written: {error.strerror or error}") from error
    finally:
        beside.unlink(missing_ok=True)
