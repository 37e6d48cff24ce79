"""Settings and fixtures of the whole suite.

Environment: `SFCPART_COMPILE=0` runs the kernels as plain Python (fewer hypothesis examples then),
`SFCPART_THREADS=1` on one thread, `CI` makes hypothesis deterministic.
"""

from __future__ import annotations

import os
from pathlib import Path

import pytest
from hypothesis import HealthCheck, settings

from sfcpart.kernels._jit import COMPILED
from tests.strategies import DEGENERATE, EMPTY, Case

_COMMON = {
    "deadline": None,  # the first call of a kernel compiles it
    "max_examples": 60 if COMPILED else 15,
    "suppress_health_check": [HealthCheck.too_slow, HealthCheck.data_too_large],
}
settings.register_profile("dev", **_COMMON)
settings.register_profile("ci", derandomize=True, database=None, print_blob=True, **_COMMON)
settings.load_profile("ci" if os.environ.get("CI") else "dev")


@pytest.fixture(params=sorted(DEGENERATE))
def degenerate(request: pytest.FixtureRequest) -> Case:
    """Give each mesh that often breaks programs, with parts and weights."""
    return DEGENERATE[request.param]()


@pytest.fixture(params=sorted(EMPTY))
def empty_call(request: pytest.FixtureRequest):
    """Give each call that would make an empty mesh and must raise MeshError."""
    return EMPTY[request.param]


@pytest.fixture(scope="session")
def root() -> Path:
    """Give the folder with tests/, meshes/ and tools/ in it."""
    return Path(__file__).resolve().parent.parent
