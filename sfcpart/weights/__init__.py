"""What cells weigh and which must stay together: from fields, tables, faces; as exact integers.

- `quantise`: floats to int64, once, with proved headroom, so that sums are exact;
- `cell_weights`: weights of the cells of a mesh from a specification (`WeightSpec`);
- `face_weights`: what it costs to cut each face;
- `groups_from_field`, `groups_from_pairs`, `groups_from_boundaries`, `join_groups`: cells that
  stay together.
"""

from __future__ import annotations

from sfcpart.weights.cells import cell_weights, counts_faces
from sfcpart.weights.faces import FACE_WEIGHTS, FaceWeight, face_weights
from sfcpart.weights.groups import groups_from_field, groups_from_pairs, join_groups
from sfcpart.weights.periodic import groups_from_boundaries
from sfcpart.weights.quantise import Quantised, quantise, quantise_limits
from sfcpart.weights.spec import WeightSpec, parse_weights

__all__ = [
    "FACE_WEIGHTS",
    "FaceWeight",
    "Quantised",
    "WeightSpec",
    "cell_weights",
    "counts_faces",
    "face_weights",
    "groups_from_boundaries",
    "groups_from_field",
    "groups_from_pairs",
    "join_groups",
    "parse_weights",
    "quantise",
    "quantise_limits",
]
