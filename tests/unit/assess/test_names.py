"""`sfcpart.assess` is a public function and the subpackage it calls: neither may hide the other."""

from __future__ import annotations

import subprocess
import sys
from importlib import import_module

import pytest

STAND_IN = (
    "import sys, types; m = types.ModuleType('sfcpart.api'); m.assess = len; "
    "sys.modules[m.__name__] = m; "
)


def run(code: str) -> str:
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    return done.stdout


@pytest.mark.parametrize(
    "first",
    [
        "import sfcpart.assess.columns",
        "from sfcpart.assess.columns import PART_COLUMNS",
        "from sfcpart.assess import NETWORKS",
        "import sfcpart; sfcpart.assess",
    ],
)
def test_the_function_stays_callable_whatever_was_imported_before(first):
    run(f"{STAND_IN}{first}; import sfcpart; assert sfcpart.assess is len")


def test_the_subpackage_can_be_imported_after_the_function_was_used():
    code = "import sfcpart; sfcpart.assess; from sfcpart.assess import columns, Column; "
    run(f"{STAND_IN}{code}assert columns.Column is Column and sfcpart.assess is len")


def test_columns_and_networks_load_no_kernel():
    code = "from sfcpart.assess import NETWORKS, PART_COLUMNS, StepModel; import sys; "
    run(f"{code}assert not {{'numba', 'scipy'}} & set(sys.modules)")


def test_a_name_that_is_not_there_is_an_attribute_error():
    package = import_module("sfcpart.assess")
    with pytest.raises(AttributeError, match="no attribute 'grade'"):
        _ = package.grade
