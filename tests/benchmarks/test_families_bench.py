"""Two-loop families: generation, first pass, tape, replay, whole results; scaling; other reductions.

Run with ``pytest tests/benchmarks --benchmark-only``; the peak memory of a result means something only
where it is the only one of the run (``-k``). Results: README.md beside this file.
"""

from __future__ import annotations

import time

import numpy as np
import pytest
from bench_families import PRIMES, derivatives, family_text, masters, peak_megabytes, subject
from flint import nmod_mat
from sympy import GF
from sympy.polys.matrices import DomainMatrix
from sympy.polys.matrices.sdm import SDM

from ibpred.diffeq.derive import differential_system
from ibpred.elimination.discovery import discover
from ibpred.elimination.pruning import prune
from ibpred.elimination.replaying import replay
from ibpred.elimination.table import evaluate_table
from ibpred.family.reading import read_family
from ibpred.identities.rows import write_rows
from ibpred.identities.seeding import Depth, seeds_of_sector
from ibpred.progress import SILENT
from ibpred.reduction.choice import choose_masters
from ibpred.reduction.deepening import deepen
from ibpred.reduction.masters import random_point
from ibpred.reduction.recording import record_quantities
from ibpred.reduction.seeds import full_plans
from ibpred.reduction.system import sparse_system
from ibpred.reduction.table import reduce_integrals
from ibpred.reduction.wanted import single
from ibpred.sectors.analysis import analyse

NAMES = (
    "planar-double-box",
    "crossed-double-box",
    "planar-double-box-one-leg",
    "planar-double-box-massive-fermion",
    "planar-double-box-all-massive",
    "pentabox",
)


@pytest.mark.parametrize("name", NAMES)
def test_generation(benchmark, name: str) -> None:
    members = [subject(name).identities]
    plans = full_plans(members, [0], Depth(1, 3))
    rows = benchmark.pedantic(write_rows, (members, plans), rounds=3, warmup_rounds=1)
    benchmark.extra_info["equations"] = len(rows.start) - 1
    benchmark.extra_info["nonzeros"] = len(rows.column)
    benchmark.extra_info["million_nonzeros_a_second"] = len(rows.column) / benchmark.stats["min"] / 1e6


@pytest.mark.parametrize("name", NAMES)
def test_first_pass(benchmark, name: str) -> None:
    members = [subject(name).identities]
    system = sparse_system(write_rows(members, full_plans(members, [0], Depth(1, 3))))
    point = random_point(subject(name).family, PRIMES[0], 1)
    found = benchmark.pedantic(discover, (system, point, PRIMES[0]), rounds=3, warmup_rounds=1)
    benchmark.extra_info["million_multiply_adds"] = found.multiply_adds / 1e6
    benchmark.extra_info["ns_each"] = benchmark.stats["min"] / found.multiply_adds * 1e9


@pytest.mark.parametrize("name", NAMES)
def test_tape_and_replay(benchmark, name: str) -> None:
    """The tape of the differential equation; what is timed is the replay of 1024 points."""
    it = subject(name)
    began = time.perf_counter()
    tape = record_quantities(it.family, it.analysis, masters(name), derivatives(name), PRIMES, 7).tape
    benchmark.extra_info["recording"] = time.perf_counter() - began
    shape = (len(tape.variables), 1024)
    points = np.random.default_rng(0).integers(1, PRIMES[0], shape).astype(np.uint64)
    _, good = benchmark.pedantic(replay, (tape, points, PRIMES[0]), rounds=3, warmup_rounds=1)
    assert good.all()
    benchmark.extra_info["terms"] = tape.multiply_adds
    benchmark.extra_info["outputs"] = len(tape.outputs)
    benchmark.extra_info["us_a_sample"] = benchmark.stats["min"] / 1024 * 1e6
    benchmark.extra_info["ns_a_term"] = benchmark.stats["min"] / 1024 / tape.multiply_adds * 1e9


@pytest.mark.parametrize("name", NAMES)
def test_differential_equation(benchmark, name: str) -> None:
    """From the family file to the differential equation, masters and their choice included."""

    def whole():
        family = read_family(family_text(name), f"{name}.toml", name)
        analysis = analyse(family)
        chosen = choose_masters(family, analysis, PRIMES, 7).masters
        return differential_system(family, analysis, chosen, PRIMES, 7)

    found = benchmark.pedantic(whole, rounds=1)
    assert found.effort is not None
    benchmark.extra_info["masters"] = len(found.system.masters)
    benchmark.extra_info["samples"] = found.effort.samples
    benchmark.extra_info["peak_megabytes"] = peak_megabytes()


@pytest.mark.parametrize(
    ("name", "rank", "everything"),
    [
        *(("planar-double-box", rank, False) for rank in (2, 3, 4, 5)),
        ("planar-double-box", 4, True),
        *(("planar-double-box-one-leg", rank, False) for rank in (2, 3, 4)),
        *(("planar-double-box-all-massive", rank, False) for rank in (2, 3, 4)),
    ],
)
def test_reduction(benchmark, name: str, rank: int, everything: bool) -> None:
    """All integrals without dots up to a rank, of the top sector or of all, from the masters on."""
    it = subject(name)
    sectors = it.analysis.nonzero if everything else (it.top,)
    lines = len(it.family.lines)
    wanted = [tuple(p) for s in sectors for p in seeds_of_sector(s, lines, Depth(0, rank)).tolist()]
    arguments = (it.family, it.analysis, wanted, masters(name), PRIMES, 7)
    table = benchmark.pedantic(reduce_integrals, arguments, rounds=1)
    benchmark.extra_info["integrals"] = len(wanted)
    if table.effort:
        benchmark.extra_info["terms"] = table.effort[0].multiply_adds
        benchmark.extra_info["samples"] = table.effort[0].samples
    benchmark.extra_info["peak_megabytes"] = peak_megabytes()


@pytest.fixture(scope="module")
def pruned():
    """What all integrals of the double box's top sector up to rank four need, as a system."""
    it = subject("planar-double-box")
    point = random_point(it.family, PRIMES[0], 7)
    known = [(0, powers) for powers in masters("planar-double-box")]
    lines = len(it.family.lines)
    top = [single(it.family, tuple(p)) for p in seeds_of_sector(it.top, lines, Depth(0, 4)).tolist()]
    deep = deepen([it.identities], top, range(len(top)), known, point, PRIMES[0], SILENT)
    return prune(deep.system, deep.discovery, deep.columns).system, point


def modular_rows(pruned) -> list[dict[int, int]]:
    system, point = pruned
    values = evaluate_table(system.table, np.array([[x] for x in point], np.uint64), PRIMES[0])[:, 0]
    rows = []
    for r in range(system.rows):
        part = slice(int(system.start[r]), int(system.start[r + 1]))
        pairs = zip(system.column[part].tolist(), system.coefficient[part].tolist(), strict=True)
        # complicated columns first, as a reduced echelon form wants them
        rows.append({system.columns - 1 - c: int(values[k]) for c, k in pairs if values[k]})
    return rows


def test_same_matrix_by_first_pass(benchmark, pruned) -> None:
    system, point = pruned
    found = benchmark.pedantic(discover, (system, point, PRIMES[0]), rounds=5, warmup_rounds=1)
    benchmark.extra_info["matrix"] = f"{system.rows} x {system.columns}"
    assert found.rank == system.rows


def test_same_matrix_by_flint(benchmark, pruned) -> None:
    system, _ = pruned
    entries = [0] * (system.rows * system.columns)
    for r, row in enumerate(modular_rows(pruned)):
        for c, v in row.items():
            entries[r * system.columns + c] = v
    dense = nmod_mat(system.rows, system.columns, entries, PRIMES[0])
    _, rank = benchmark.pedantic(dense.rref, rounds=1)
    assert rank == system.rows


def test_same_matrix_by_sympy(benchmark, pruned) -> None:
    system, _ = pruned
    field = GF(PRIMES[0])
    rows = {r: {c: field(v) for c, v in row.items()} for r, row in enumerate(modular_rows(pruned))}
    matrix = DomainMatrix.from_rep(SDM(rows, (system.rows, system.columns), field))
    _, pivots = benchmark.pedantic(matrix.rref, rounds=1)
    assert len(pivots) == system.rows
