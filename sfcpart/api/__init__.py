"""The public verbs: check, plan, call, wrap; one module for what is done together.

mesh = sfcpart.read_mesh("channel.vtu")
partition = sfcpart.split(mesh, 64)
assessment = sfcpart.assess(mesh, partition)
sfcpart.write_split("parts", mesh, partition)
"""

from sfcpart.api.costs import class_counts, fit_weights, write_costs
from sfcpart.api.divide import split
from sfcpart.api.judge import assess, compare, graph_of, inspect
from sfcpart.api.network import measure_network, read_network, write_network
from sfcpart.api.rebalance import rebalance, write_rebalance
from sfcpart.api.replay import replay
from sfcpart.api.smooth import smooth
from sfcpart.api.write import write_split
from sfcpart.curve import curve_keys, curve_order
from sfcpart.files.meshes.cell_values import read_cell_values
from sfcpart.files.meshes.read import read_mesh
from sfcpart.files.meshes.read_slice import read_slice
from sfcpart.files.parts.moves import PartMoves, read_moves
from sfcpart.files.parts.part import Part, read_part
from sfcpart.files.series.frame import Frame
from sfcpart.files.series.read import read_series
from sfcpart.graph import cell_graph
from sfcpart.mesh.mesh import Mesh
from sfcpart.partition import Partition
from sfcpart.resplit.clock import RebalanceClock
from sfcpart.resplit.timetable import ResplitCost
from sfcpart.scaling import forecast

__all__ = [
    "Frame",
    "Mesh",
    "Part",
    "PartMoves",
    "Partition",
    "RebalanceClock",
    "ResplitCost",
    "assess",
    "cell_graph",
    "class_counts",
    "compare",
    "curve_keys",
    "curve_order",
    "fit_weights",
    "forecast",
    "graph_of",
    "inspect",
    "measure_network",
    "read_cell_values",
    "read_mesh",
    "read_moves",
    "read_network",
    "read_part",
    "read_series",
    "read_slice",
    "rebalance",
    "replay",
    "smooth",
    "split",
    "write_costs",
    "write_network",
    "write_rebalance",
    "write_split",
]
