"""First pass and replay on one-loop identities (massive bubble), beside general-purpose reductions.

Run with ``pytest tests/benchmarks --benchmark-only``.
"""

from __future__ import annotations

from importlib.util import module_from_spec, spec_from_file_location
from pathlib import Path
from typing import NamedTuple

import numpy as np
import pytest
from flint import nmod_mat
from sympy import GF
from sympy.polys.matrices import DomainMatrix
from sympy.polys.matrices.sdm import SDM

from ibpred.elimination.discovery import discover, discover_leading, reduced
from ibpred.elimination.pruning import Pruned, prune
from ibpred.elimination.recording import record_pruned
from ibpred.elimination.replaying import replay
from ibpred.elimination.system import SparseSystem
from ibpred.elimination.table import evaluate_table
from ibpred.exact.primes import first_primes

PRIME = first_primes(1)[0]
POINT = (314159265358979, 271828182845904)
POWERS = 24


def _massive_bubble(powers: int) -> tuple[SparseSystem, dict[tuple[int, int], int]]:
    file = Path(__file__).parents[1] / "elimination" / "engine_systems.py"
    spec = spec_from_file_location("engine_systems_for_benchmarks", file)
    assert spec is not None
    assert spec.loader is not None
    module = module_from_spec(spec)
    spec.loader.exec_module(module)
    return module.massive_bubble(powers)


class Case(NamedTuple):
    system: SparseSystem
    pruned: Pruned
    matrix: list[dict[int, int]]


@pytest.fixture(scope="module")
def case() -> Case:
    system, place = _massive_bubble(POWERS)
    wanted = [place[a, b] for a in range(1, POWERS) for b in range(1, POWERS)]
    pruned = prune(system, discover(system, POINT, PRIME), wanted)
    small = pruned.system
    values = evaluate_table(small.table, np.array(POINT, np.uint64).reshape(2, 1), PRIME)[:, 0]
    matrix = []
    for r in range(small.rows):
        part = slice(int(small.start[r]), int(small.start[r + 1]))
        pairs = zip(small.column[part].tolist(), small.coefficient[part].tolist(), strict=True)
        # complicated columns first, as a reduced echelon form wants them
        matrix.append({small.columns - 1 - c: int(values[k]) for c, k in pairs if values[k]})
    return Case(system, pruned, matrix)


def test_first_pass_of_the_whole_system(benchmark, case: Case) -> None:
    discover(case.system, POINT, PRIME)
    found = benchmark(discover, case.system, POINT, PRIME)
    benchmark.extra_info["multiply_adds"] = found.multiply_adds


def test_first_pass_of_the_pruned_system(benchmark, case: Case) -> None:
    found = benchmark(discover, case.pruned.system, POINT, PRIME)
    assert found.rank == case.pruned.system.rows


def test_leading_only_pass_of_the_pruned_system(benchmark, case: Case) -> None:
    benchmark(discover_leading, case.pruned.system, POINT, PRIME)


def test_recording(benchmark, case: Case) -> None:
    tape = benchmark(record_pruned, case.pruned, POINT, PRIME)
    benchmark.extra_info["multiply_adds"] = tape.multiply_adds


def test_replay_of_256_points(benchmark, case: Case) -> None:
    tape = record_pruned(case.pruned, POINT, PRIME)
    points = np.random.default_rng(0).integers(0, PRIME, (2, 256)).astype(np.uint64)
    replay(tape, points, PRIME)
    _, good = benchmark(replay, tape, points, PRIME)
    assert good.all()


def test_dense_reduction_by_flint(benchmark, case: Case) -> None:
    rows, columns = case.pruned.system.rows, case.pruned.system.columns
    entries = [0] * (rows * columns)
    for r, row in enumerate(case.matrix):
        for c, v in row.items():
            entries[r * columns + c] = v
    dense = nmod_mat(rows, columns, entries, PRIME)
    _, rank = benchmark.pedantic(dense.rref, rounds=1)
    assert rank == rows


def test_sparse_reduction_by_sympy(benchmark, case: Case) -> None:
    field = GF(PRIME)
    rows, columns = case.pruned.system.rows, case.pruned.system.columns
    sparse = SDM(
        {r: {c: field(v) for c, v in row.items()} for r, row in enumerate(case.matrix)},
        (rows, columns),
        field,
    )
    matrix = DomainMatrix.from_rep(sparse)
    _, pivots = benchmark.pedantic(matrix.rref, rounds=1)
    found = discover(case.pruned.system, POINT, PRIME)
    assert sorted(columns - 1 - c for c in pivots) == sorted(found.pivot.tolist())
    assert reduced(found, case.pruned.wanted).masters
