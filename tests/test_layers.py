"""The rooms import in one direction only, and the light modules stay light."""

from __future__ import annotations

import ast
import subprocess
import sys
from graphlib import TopologicalSorter
from pathlib import Path

import pytest

import ibpred

PACKAGE = Path(ibpred.__file__).parent
ORDER = [
    ("errors", "digest", "progress", "options"),
    ("exact", "kernels", "balls"),
    ("family",),
    ("sectors",),
    ("identities",),
    ("elimination",),
    ("reconstruct",),
    ("reduction",),
    ("diffeq",),
    ("epsform",),
    ("iterated",),
    ("boundary",),
    ("numerics",),
    ("report",),
    ("run",),
    ("cli",),
]
RANK = {room: i for i, rooms in enumerate(ORDER) for room in rooms}
FILES = sorted(PACKAGE.rglob("*.py"))
FACE = PACKAGE / "__init__.py"


def room_of(module: str) -> str:
    return module.split(".")[1]


def imported(path: Path) -> set[str]:
    found: set[str] = set()
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            found.update(alias.name for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"{path}: relative import"
            found.add(node.module or "")
    return {name for name in found if name == "ibpred" or name.startswith("ibpred.")}


@pytest.mark.parametrize("path", FILES, ids=lambda p: str(p.relative_to(PACKAGE)))
def test_imports_go_one_way(path: Path) -> None:
    parts = path.relative_to(PACKAGE).with_suffix("").parts
    if parts == ("__init__",):
        return
    room = parts[0]
    assert room in RANK, f"{room} has no place in the order"
    for name in imported(path):
        if name == "ibpred":
            continue
        other = room_of(name)
        same = other == room
        ground = RANK[other] == RANK[room] == 0
        assert same or ground or RANK[other] < RANK[room], f"{room} must not import {name}"


def test_no_files_import_each_other_in_a_circle() -> None:
    names = {".".join(("ibpred", *p.relative_to(PACKAGE).with_suffix("").parts)): p for p in FILES}
    # the package's face hands names on lazily
    graph = {name: imported(path) & names.keys() for name, path in names.items() if path != FACE}
    TopologicalSorter(graph).prepare()  # raises CycleError, which names the circle


@pytest.mark.parametrize("path", FILES, ids=lambda p: str(p.relative_to(PACKAGE)))
def test_files_stay_short(path: Path) -> None:
    assert len(path.read_text(encoding="utf-8").splitlines()) <= 420


@pytest.mark.parametrize("path", FILES, ids=lambda p: str(p.relative_to(PACKAGE)))
def test_nothing_is_evaluated(path: Path) -> None:
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Call) and isinstance(node.func, ast.Name):
            assert node.func.id not in {"eval", "exec", "sympify", "compile"}
        if isinstance(node, ast.Import):
            assert all(alias.name not in {"pickle", "marshal", "shelve", "dill"} for alias in node.names)


@pytest.mark.parametrize("module", ["ibpred", "ibpred.cli.main"])
def test_import_is_light(module: str) -> None:
    code = (
        f"import sys, {module}; "
        "print([m for m in ('sympy', 'numba', 'matplotlib', 'scipy', 'igraph') if m in sys.modules])"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"
