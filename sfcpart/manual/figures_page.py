"""The page of figures, made from `sfcpart.measure.columns`, so that it cannot lag behind."""

from __future__ import annotations

from sfcpart.measure import LEAVES_OUT, NETWORKS, PART_COLUMNS, TOTAL_COLUMNS, StepModel
from sfcpart.measure.columns import RUN_COLUMNS, markdown_table

HEAD = """# The figures of a partition

`sfcpart assess`, `parts.csv`, `summary.json` and `Assessment` use the same keys. They are stable:
a key may be added, none is renamed or removed. A figure that cannot be known is empty in CSV and
null in JSON. A partition changes the order in which a solver sums its cells; none of these figures
says whether a simulation is right.

Periodic and coupled pairs that are kept together are no faces of the mesh: they count in neither
cut nor halo, and a part may hold both ends of the mesh in pieces of its own."""

BOUNDS = """## Lower bounds

Bounds hold for splits into parts of the same sizes. Uniform lattices of squares or cubes: least
perimeter of n squares (Harary and Harborth 1976, OEIS A027709), least surface of n cubes (Alonso
and Cerf 1996, OEIS A193416), on full boxes also lines that a part must cut (squares), Bollobas and
Leader 1991 and the bisection width (cubes). Planar and solid meshes with points: the disc or ball
of each part's measure (isoperimetric inequality; faces are taken to be plane). Curved surfaces and
meshes given by their faces have none, for faces alone do not show whether some of them join
opposite ends."""


def page() -> str:
    """Return the page."""
    default = StepModel()
    networks = [
        "| network | latency, s | bandwidth, bytes/s | source |",
        "|---|---|---|---|",
        *(
            f"| `{n.name}` | {n.latency:g} | {n.bandwidth:g} | {n.source} |"
            for n in NETWORKS.values()
        ),
    ]
    model = f"""## The predicted step

Time of a part = work / speed + exchanges * (sum over its neighbours of latency + bytes /
bandwidth), bytes = the larger of cells sent and received, times the bytes of one halo cell. The
step takes as long as the slowest part. Defaults: network `{default.network.name}`,
{default.cell_seconds:g} s a cell, {default.bytes_per_halo_cell:g} bytes a halo cell,
{default.exchanges:g} exchanges a step (common practice, no source).

{chr(10).join(networks)}

Left out: {"; ".join(LEAVES_OUT)}."""
    parts = [
        HEAD,
        "## Of each part",
        markdown_table(PART_COLUMNS),
        "## In total",
        markdown_table(TOTAL_COLUMNS),
        "## Of a way to split\n\n`sfcpart compare` adds to the totals:",
        markdown_table(RUN_COLUMNS),
        BOUNDS,
        model,
    ]
    return "\n\n".join(parts) + "\n"
