"""The public verbs: check, plan, call, wrap; one module for what is done together.

mesh = sfcpart.read_mesh("channel.vtu")
partition = sfcpart.split(mesh, 64)
assessment = sfcpart.assess(mesh, partition)
sfcpart.write_split("parts", mesh, partition)
"""

from sfcpart.api.divide import split
from sfcpart.api.judge import assess, compare, graph_of, inspect
from sfcpart.api.rebalance import rebalance
from sfcpart.api.write import write_split
from sfcpart.curve import curve_keys, curve_order
from sfcpart.files.meshes.cell_values import read_cell_values
from sfcpart.files.meshes.read import read_mesh
from sfcpart.files.parts.part import Part, read_part
from sfcpart.graph import cell_graph
from sfcpart.mesh.mesh import Mesh
from sfcpart.partition import Partition

__all__ = [
    "Mesh",
    "Part",
    "Partition",
    "assess",
    "cell_graph",
    "compare",
    "curve_keys",
    "curve_order",
    "graph_of",
    "inspect",
    "read_cell_values",
    "read_mesh",
    "read_part",
    "rebalance",
    "split",
    "write_split",
]
