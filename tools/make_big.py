"""Make big meshes by rule, to a path given.

    python tools/make_big.py tets 1000000 tets.vtu
    python tools/make_big.py hexes 10000000 hexes.vtkhdf
    python tools/make_big.py layers 5000000 layers.vtkhdf --shuffle 1
    python tools/make_big.py refined 10000000 refined.h5

What: `tets` (jittered lattice, six tets a cube), `hexes` (cubes), `layers` (the Skerry Channel
swept from its section: hexahedra at the bed, wedges above), `section` (that section, 2-D),
`refined` (a box with hanging nodes by its faces; always a faces file). The number of cells is met
as nearly as the rule allows. The ending chooses the format: .vtkhdf, .h5 (faces), or any that
meshio writes. `--shuffle SEED` puts the cells of each block in random order, the worst input.
"""

from __future__ import annotations

import argparse
from pathlib import Path

import meshio
from mesh_files import write_meshio, write_vtkhdf

from sfcpart.files.meshes.faces_file import write_faces
from sfcpart.mesh.channel import channel_section, channel_water
from sfcpart.mesh.refined import FaceShape, refined_box
from sfcpart.mesh.shape import Shape
from sfcpart.mesh.shapes import jittered_tets, lattice


def tets(n_cells: int) -> Shape:
    return jittered_tets((max(1, round((n_cells / 6) ** (1 / 3))),) * 3)


def hexes(n_cells: int) -> Shape:
    return lattice((max(1, round(n_cells ** (1 / 3))),) * 3)


def layers(n_cells: int) -> Shape:
    n_along = max(10, round((n_cells * 8) ** (1 / 3)))
    n_up = max(2, n_along // 8)
    flat = channel_section(n_along, n_up).n_cells
    return channel_water(n_along, n_up, n_across=max(1, round(n_cells / flat)))


def section(n_cells: int) -> Shape:
    n_up = max(2, round((n_cells / 10) ** 0.5))
    return channel_section(5 * n_up + 5, n_up)


def refined(n_cells: int) -> FaceShape:
    return refined_box(max(4, 4 * round((n_cells / 2.75) ** (1 / 3) / 4)), n_levels=2)


MAKERS = {f.__name__: f for f in (tets, hexes, layers, section, refined)}


def main() -> None:
    parser = argparse.ArgumentParser(
        description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter
    )
    parser.add_argument("what", choices=MAKERS)
    parser.add_argument("n_cells", type=lambda text: int(float(text)))
    parser.add_argument("path", type=Path)
    parser.add_argument("--shuffle", type=int, metavar="SEED")
    asked = parser.parse_args()
    shape = MAKERS[asked.what](asked.n_cells)
    if asked.shuffle is not None:
        shape = shape.with_shuffled_cells(asked.shuffle)
    if isinstance(shape, FaceShape):
        write_faces(asked.path, shape.to_mesh())
    elif asked.path.suffix == ".vtkhdf":
        write_vtkhdf(asked.path, shape)
    else:
        try:
            write_meshio(asked.path, shape)
        except meshio.ReadError as unknown:  # so meshio calls an ending it cannot write
            parser.error(str(unknown))
    print(f"{asked.path}: {shape.n_cells} cells")


if __name__ == "__main__":
    main()
