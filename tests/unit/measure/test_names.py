"""Names of the package are loaded on first use."""

from __future__ import annotations

import subprocess
import sys
from importlib import import_module

import pytest


def run(code: str) -> str:
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    return done.stdout


def test_columns_and_networks_load_no_kernel():
    code = "from sfcpart.measure import NETWORKS, PART_COLUMNS, StepModel; import sys; "
    run(f"{code}assert not {{'numba', 'scipy'}} & set(sys.modules)")


def test_a_name_that_is_not_there_is_an_attribute_error():
    package = import_module("sfcpart.measure")
    with pytest.raises(AttributeError, match="no attribute 'grade'"):
        _ = package.grade
