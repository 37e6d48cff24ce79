"""Graph, pieces, figures, exchange lists and groups of slices on MPI ranks as of whole meshes."""

from __future__ import annotations

import numpy as np
import pytest

from sfcpart.slices.mesh_slice import MeshSlice
from tests.mpi.harness import run_job
from tests.mpi.slices_job import MESHES, seen


@pytest.mark.parametrize("size", [2, 4])
def test_slices_on_ranks_are_the_whole(size, tmp_path):
    run_job("tests.mpi.slices_job", size, tmp_path)
    with np.load(tmp_path / "seen.npz") as found:
        for name, make in MESHES.items():
            for key, wanted in seen(MeshSlice.whole(make())).items():
                array = found[f"{name} {key}"]
                if isinstance(wanted, str):
                    assert str(array[0]) == wanted
                else:
                    assert array.dtype == wanted.dtype
                    assert array.tobytes() == wanted.tobytes(), (name, key)
