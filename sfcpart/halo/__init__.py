"""Exchange lists of all parts at once: who needs which foreign cells, and who sends them.

What: each part owns its cells, in curve order, and needs a halo: the foreign cells within
`layers` steps across shared faces, or across shared points.
How: parts are spread over the cell graph (or over the relation of cells and points) layer by
layer and the resulting pairs are sorted by counting (`sfcpart.kernels.halo`).
Cost: O(layers x entries of the relation) time and O(n_cells + halo) memory.
Source: common practice, no source.
"""

from __future__ import annotations

from sfcpart.halo.build import build_halo, build_halo_slice
from sfcpart.halo.lists import Across, Halo

__all__ = ["Across", "Halo", "build_halo", "build_halo_slice"]
