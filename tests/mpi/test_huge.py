"""Arrays of more than 2^31 bytes cross between ranks (7 GB of memory: only when asked for)."""

from __future__ import annotations

import json
import os

import pytest

from tests.mpi.harness import run_job
from tests.mpi.huge_job import N_BYTES


@pytest.mark.skipif(
    not os.environ.get("SFCPART_TEST_HUGE"), reason="needs 7 GB; set SFCPART_TEST_HUGE=1 to run it"
)
def test_more_than_two_gib(tmp_path):
    run_job("tests.mpi.huge_job", 2, tmp_path, timeout=600.0)
    seen = json.loads((tmp_path / "seen.json").read_text())
    assert seen == [[N_BYTES, [1, 2, 3, 4], 17]] * 3
