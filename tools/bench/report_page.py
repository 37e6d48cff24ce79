"""What a report page costs: its writing against the split itself, its size, its first drawing.

    python tools/bench/report_page.py [--cells 1000000] [--parts 64] [--browser]

The mesh is a jittered lattice of tets in random cell order, or with --delaunay a Delaunay mesh of
random points. The split is cell graph, curve, cuts, measuring, and the folder that a solver loads.
Seconds of wall and (in brackets) of the processor; ratios of one run count. With --browser
(Chromium and its driver on the path, selenium installed) the page is opened from its file, three
times.
"""

from __future__ import annotations

import argparse
import tempfile
import time
from collections.abc import Callable
from pathlib import Path

import numpy as np

import sfcpart
from sfcpart.api import graph_of
from sfcpart.mesh.mesh import Mesh
from sfcpart.mesh.shapes import jittered_tets
from sfcpart.report.page import split_page, write_page


def timed(call: Callable[[], object]) -> tuple[object, float, float]:
    began = time.perf_counter(), time.process_time()
    result = call()
    return result, time.perf_counter() - began[0], time.process_time() - began[1]


def make_mesh(n_cells: int, *, delaunay: bool) -> Mesh:
    random = np.random.default_rng(0)
    if delaunay:
        from scipy.spatial import Delaunay

        points = random.random((round(n_cells / 6.73), 3))
        return Mesh.from_arrays(points, {"tetra": Delaunay(points).simplices})
    side = round((n_cells / 6) ** (1 / 3))
    shape = jittered_tets((side,) * 3)
    (name, cells), *_ = shape.cells.items() if isinstance(shape.cells, dict) else shape.cells
    return Mesh.from_arrays(shape.points, {name: random.permutation(cells)})


def split_and_measure(mesh: Mesh, n_parts: int):
    partition = sfcpart.split(mesh, n_parts)
    return partition, sfcpart.assess(mesh, partition)


def first_drawing(path: Path) -> list[float]:
    """Open a page and return when its first drawing was there, in seconds, three times."""
    import sys

    sys.path.insert(0, str(Path(__file__).resolve().parents[2]))
    from tests.browser.conftest import start

    browser = start()
    try:
        seconds = []
        for _ in range(3):
            browser.get(path.as_uri())
            mark = "return performance.getEntriesByName('first-drawing')[0].startTime"
            seconds.append(browser.execute_script(mark) / 1000)
        return seconds
    finally:
        browser.quit()


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--cells", type=int, default=1_000_000)
    parser.add_argument("--parts", type=int, default=64)
    parser.add_argument("--delaunay", action="store_true")
    parser.add_argument("--browser", action="store_true")
    given = parser.parse_args()
    small = jittered_tets((4, 4, 4)).to_mesh()
    warm = split_and_measure(small, 4)
    with tempfile.TemporaryDirectory() as folder:
        sfcpart.write_split(f"{folder}/parts", small, warm[0], assessment=warm[1], report=True)
    mesh = make_mesh(given.cells, delaunay=given.delaunay)
    assert len(mesh.centers) == mesh.n_cells
    (partition, assessment), wall, cpu = timed(lambda: split_and_measure(mesh, given.parts))
    print(f"{mesh.n_cells:,} tets, {given.parts:,} parts")
    print(f"split and measured   {wall:.2f} s ({cpu:.2f})")
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "report.html"
        _, more_wall, more_cpu = timed(
            lambda: sfcpart.write_split(f"{folder}/parts", mesh, partition, assessment=assessment)
        )
        print(f"folder written       {more_wall:.2f} s ({more_cpu:.2f})")
        wall, cpu = wall + more_wall, cpu + more_cpu

        def write() -> None:
            page = split_page(mesh, partition, assessment=assessment, graph=graph_of(mesh))
            write_page(path, page)

        _, page_wall, page_cpu = timed(write)
        print(f"page made and written {page_wall:.2f} s ({page_cpu:.2f})", end="")
        print(f": {page_wall / wall:.2f} ({page_cpu / cpu:.2f}) of both")
        print(f"size                 {path.stat().st_size / 1e6:.2f} MB")
        if given.browser:
            times = ", ".join(f"{second:.2f}" for second in first_drawing(path))
            print(f"first drawing after  {times} s")


if __name__ == "__main__":
    main()
