"""Measuring a partition, and looking over a mesh.

Names are loaded on first use, so that the columns and the networks can be listed without loading
(let alone compiling) a kernel.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from sfcpart.measure.assess import assess_partition, assess_slice
    from sfcpart.measure.assessment import Assessment
    from sfcpart.measure.columns import PART_COLUMNS, TOTAL_COLUMNS, Column
    from sfcpart.measure.pairs import PartPairs
    from sfcpart.measure.step_model import DEFAULT_NETWORK, LEAVES_OUT, NETWORKS, Network, StepModel

__all__ = [
    "DEFAULT_NETWORK",
    "LEAVES_OUT",
    "NETWORKS",
    "PART_COLUMNS",
    "TOTAL_COLUMNS",
    "Assessment",
    "Column",
    "Network",
    "PartPairs",
    "StepModel",
    "assess_partition",
    "assess_slice",
]

_HOME = {
    "Assessment": "assessment",
    "Column": "columns",
    "PART_COLUMNS": "columns",
    "TOTAL_COLUMNS": "columns",
    "PartPairs": "pairs",
    "assess_partition": "assess",
    "assess_slice": "assess",
}


def __getattr__(name: str) -> Any:
    """Import a public name on first use."""
    if name not in __all__:
        raise AttributeError(f"module 'sfcpart.measure' has no attribute {name!r}")
    return getattr(import_module(f"sfcpart.measure.{_HOME.get(name, 'step_model')}"), name)
