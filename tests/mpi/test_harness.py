"""A job that fails or hangs ends, and says so; this process knows nothing of MPI."""

from __future__ import annotations

import sys

import pytest

from tests.mpi.harness import MpiJobError, run_job


def test_a_failing_job_is_reported(tmp_path):
    folder = tmp_path / "fails"
    with pytest.raises(MpiJobError, match="ValueError: on purpose"):
        run_job("tests.mpi.failing_job", 2, folder)


def test_a_hanging_job_is_killed(tmp_path):
    with pytest.raises(MpiJobError, match="2 ranks of tests.mpi.failing_job ran over 3 s"):
        run_job("tests.mpi.failing_job", 2, tmp_path / "hangs", timeout=3.0)


def test_this_process_has_not_loaded_mpi():
    assert "mpi4py.MPI" not in sys.modules
