"""The memory a split is said to take."""

from __future__ import annotations

from sfcpart.measure.memory import memory_of_counts, split_memory
from sfcpart.mesh.mesh import Mesh
from tests.strategies import grid


def test_the_memory_of_a_split_grows_with_the_mesh():
    small, large = grid((4, 4, 4)), grid((8, 8, 8))
    assert split_memory(large) > split_memory(small)
    assert 300 < (split_memory(large) - split_memory(small)) / (512 - 64) < 400


def test_counts_alone_tell_the_same():
    mesh = grid((5, 4, 3))
    arrays = (mesh.points, mesh.kind, mesh.indptr, mesh.indices)
    held = sum(array.nbytes for array in arrays)
    assert memory_of_counts(60, n_faces=360, held=held) == split_memory(mesh)


def test_centres_need_no_room_for_a_graph():
    bare = Mesh.from_centers(grid((5, 4, 3)).centers)
    assert split_memory(bare) < split_memory(grid((5, 4, 3))) - 60 * 32 * 4
