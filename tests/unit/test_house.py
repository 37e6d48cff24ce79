"""Laws of DEVELOPERS.md that no other tool keeps."""

from __future__ import annotations

import ast
import tomllib
from pathlib import Path

import sfcpart

PACKAGE = Path(sfcpart.__file__).parent


def trees() -> dict[str, ast.Module]:
    """Parse every module of the package, by its path inside it."""
    files = sorted(PACKAGE.rglob("*.py"))
    return {file.relative_to(PACKAGE).as_posix(): ast.parse(file.read_text()) for file in files}


def test_only_the_communicators_ask_whether_they_are_alone():
    # Law 1: serial is size 1, not another code path.
    asks = [
        f"{name}:{node.lineno}"
        for name, tree in trees().items()
        if not name.startswith("comm/")
        for node in ast.walk(tree)
        if isinstance(node, ast.Compare)
        and ast.unparse(node.left).endswith("comm.size")
        and [ast.unparse(other) for other in node.comparators] in (["1"], ["2"])
    ]
    assert asks == []


def test_kernels_take_the_threads_of_one_pool():
    # numba's own parallel loops do not nest under ranks that are threads.
    words = {"prange", "parallel"}
    used = [
        f"{name}:{node.lineno}"
        for name, tree in trees().items()
        for node in ast.walk(tree)
        if (isinstance(node, ast.Name) and node.id == "prange")
        or (isinstance(node, ast.keyword) and node.arg in words)
    ]
    assert used == []


def test_the_package_is_typed_and_of_the_version_it_is_built_as(root):
    built = tomllib.loads((root / "pyproject.toml").read_text())
    assert (PACKAGE / "py.typed").exists()
    assert built["project"]["version"] == sfcpart.__version__
