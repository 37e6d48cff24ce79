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

_COMMON = {
    "deadline": None,  # the first call of a kernel compiles it
    "max_examples": 60 if COMPILED else 15,
    "suppress_health_check": [HealthCheck.too_slow, HealthCheck.data_too_large],
}
settings.register_profile("dev", **_COMMON)
settings.register_profile("ci", derandomize=True, database=None, print_blob=True, **_COMMON)
settings.load_profile("ci" if os.environ.get("CI") else "dev")


def pytest_collection_modifyitems(items: list[pytest.Item]) -> None:
    """Skip tests marked `large` when kernels run as plain Python."""
    if not COMPILED:
        for item in items:
            if item.get_closest_marker("large"):
                item.add_marker(pytest.mark.skip(reason="too slow as plain Python"))


def pytest_generate_tests(metafunc: pytest.Metafunc) -> None:
    """Run a test that asks for `degenerate` or `empty_call` once for each of them.

    `degenerate` is a `Case`: a mesh that often breaks programs, with parts and weights;
    `empty_call` is a call that would make an empty mesh and must raise MeshError.
    """
    for name, table in (("degenerate", "DEGENERATE"), ("empty_call", "EMPTY")):
        if name in metafunc.fixturenames:
            from tests import strategies

            cases = sorted(getattr(strategies, table))
            metafunc.parametrize(name, cases, indirect=True)


@pytest.fixture
def degenerate(request: pytest.FixtureRequest):
    """Make one of the meshes that often break programs, with parts and weights."""
    from tests.strategies import DEGENERATE

    return DEGENERATE[request.param]()


@pytest.fixture
def empty_call(request: pytest.FixtureRequest):
    """Give one of the calls that would make an empty mesh and must raise MeshError."""
    from tests.strategies import EMPTY

    return EMPTY[request.param]


@pytest.fixture(scope="session")
def root() -> Path:
    """Give the folder with tests/, meshes/ and tools/ in it."""
    return Path(__file__).resolve().parent.parent
