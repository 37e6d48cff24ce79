"""Make the small meshes in `meshes/` again: `python tools/make_meshes.py [FOLDER]`."""

from __future__ import annotations

import sys
from pathlib import Path

from mesh_files import write_meshio, write_msh, write_vtkhdf

from sfcpart.mesh.channel import channel_mixed, channel_section
from sfcpart.mesh.shapes import truncated_octahedra
from sfcpart.mesh.structures import channel_with_rotor, pier_shell

HOME = Path(__file__).resolve().parent.parent / "meshes"


def main(folder: Path) -> None:
    folder.mkdir(parents=True, exist_ok=True)
    write_msh(
        folder / "channel_section.msh", channel_section(40, 8), regions=["water", "layers", "wake"]
    )
    write_meshio(folder / "channel_mixed.vtu", channel_mixed((16, 6), rows=(1, 2, 3)))
    write_meshio(folder / "pier_shell.vtk", pier_shell(36, 12, fin=4))
    write_meshio(folder / "turbine.vtu", channel_with_rotor(8))
    write_vtkhdf(folder / "kelvin_cells.vtkhdf", truncated_octahedra((4, 3, 3)))


if __name__ == "__main__":
    main(Path(sys.argv[1]) if len(sys.argv) > 1 else HOME)
