"""Laws of DEVELOPERS.md that no other tool keeps."""

from __future__ import annotations

import ast
import inspect
import re
import tomllib
from collections.abc import Callable
from pathlib import Path

import sfcpart
import sfcpart.api
import sfcpart.parallel

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


def test_the_developers_page_names_every_room(root):
    page = (root / "DEVELOPERS.md").read_text()
    rooms = {f"{place.name}/" for place in PACKAGE.iterdir() if (place / "__init__.py").exists()}
    rooms |= {place.name for place in PACKAGE.glob("*.py") if place.name != "__init__.py"}
    assert [room for room in sorted(rooms) if f"`{room}`" not in page] == []


def public_calls() -> dict[str, Callable]:
    """Return what scripts outside call: public functions and methods of public classes."""
    public = {name: getattr(sfcpart, name) for name in sfcpart.__all__}
    public |= {name: getattr(sfcpart.parallel, name) for name in sfcpart.parallel.__all__}
    for kind in (*[c for c in public.values() if inspect.isclass(c)], sfcpart.api.Part):
        for name in vars(kind):
            if name[0] != "_" and callable(getattr(kind, name)):
                public[f"{kind.__name__}.{name}"] = getattr(kind, name)
    return {name: call for name, call in public.items() if callable(call)}


def test_public_calls_are_documented_the_same_way():
    # numpydoc: what goes in, what comes out, what is raised, an example that runs as a doctest.
    lacking = []
    for name, call in public_calls().items():
        text = inspect.getdoc(call) or ""
        given = [p for p in inspect.signature(call).parameters if p not in ("self", "cls")]
        lacking += [f"{name}: parameter {p}" for p in given if p not in text]
        wanted = ["Examples"]
        if not inspect.isclass(call):
            wanted += ["Parameters"] if given else []
            source = inspect.getsource(call)
            wanted += ["Returns"] if re.search(r"^ {4,8}return \S", source, re.M) and given else []
            wanted += ["Raises"] if re.search(r"^ +raise ", source, re.M) else []
        lacking += [f"{name}: {head}" for head in wanted if f"{head}\n---" not in text]
    assert lacking == []


def test_the_package_is_typed_and_of_the_version_it_is_built_as(root):
    built = tomllib.loads((root / "pyproject.toml").read_text())
    assert (PACKAGE / "py.typed").exists()
    assert built["project"]["version"] == sfcpart.__version__
