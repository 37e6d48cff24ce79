"""Divide finite-volume meshes among MPI ranks along a Hilbert curve, and measure the result.

The public names are loaded on first use: `import sfcpart` starts no MPI and compiles nothing.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from sfcpart.api import (  # type: ignore[no-redef]  # verbs share the names of their modules
        Frame,
        Mesh,
        Partition,
        RebalanceClock,
        ResplitCost,
        assess,
        cell_graph,
        class_counts,
        compare,
        curve_keys,
        curve_order,
        fit_weights,
        forecast,
        inspect,
        measure_network,
        read_mesh,
        read_moves,
        read_network,
        read_part,
        read_series,
        read_slice,
        rebalance,
        replay,
        smooth,
        split,
        write_costs,
        write_network,
        write_rebalance,
        write_split,
    )
    from sfcpart.methods.graph.multilevel import split_graph

__version__ = "0.1.0"

_PUBLIC = {
    "Frame": "sfcpart.files.series.frame",
    "Mesh": "sfcpart.mesh.mesh",
    "Partition": "sfcpart.partition",
    "RebalanceClock": "sfcpart.resplit.clock",
    "ResplitCost": "sfcpart.resplit.timetable",
    "assess": "sfcpart.api.judge",
    "cell_graph": "sfcpart.graph",
    "class_counts": "sfcpart.api.costs",
    "compare": "sfcpart.api.judge",
    "curve_keys": "sfcpart.curve",
    "curve_order": "sfcpart.curve",
    "forecast": "sfcpart.scaling",
    "fit_weights": "sfcpart.weights.fit",
    "inspect": "sfcpart.api.judge",
    "measure_network": "sfcpart.api.network",
    "read_mesh": "sfcpart.files.meshes.read",
    "read_moves": "sfcpart.files.parts.moves",
    "read_network": "sfcpart.api.network",
    "read_part": "sfcpart.files.parts.part",
    "read_series": "sfcpart.files.series.read",
    "read_slice": "sfcpart.files.meshes.read_slice",
    "rebalance": "sfcpart.api.rebalance",
    "replay": "sfcpart.api.replay",
    "smooth": "sfcpart.api.smooth",
    "split": "sfcpart.api.divide",
    "split_graph": "sfcpart.methods.graph.multilevel",
    "write_costs": "sfcpart.api.costs",
    "write_network": "sfcpart.api.network",
    "write_rebalance": "sfcpart.api.rebalance",
    "write_split": "sfcpart.api.write",
}

__all__ = [  # noqa: RUF022 - in the order a user meets them
    "read_mesh",
    "Mesh",
    "inspect",
    "cell_graph",
    "curve_keys",
    "curve_order",
    "split",
    "split_graph",
    "smooth",
    "Partition",
    "assess",
    "compare",
    "forecast",
    "write_split",
    "read_part",
    "read_slice",
    "rebalance",
    "write_rebalance",
    "read_moves",
    "class_counts",
    "fit_weights",
    "write_costs",
    "RebalanceClock",
    "Frame",
    "read_series",
    "ResplitCost",
    "replay",
    "measure_network",
    "write_network",
    "read_network",
    "__version__",
]


def __getattr__(name: str) -> Any:
    """Import a public name on first use."""
    if name not in _PUBLIC:
        raise AttributeError(f"module 'sfcpart' has no attribute {name!r}")
    value = getattr(import_module(_PUBLIC[name]), name)
    globals()[name] = value
    return value


def __dir__() -> list[str]:
    """List the public names."""
    return sorted(__all__)
