from __future__ import annotations

import numpy as np
import pytest
from engine_systems import dictionaries, massive_bubble, random_system
from flint import nmod_mat
from hypothesis import given, settings
from hypothesis import strategies as st

from ibpred.elimination.discovery import (
    check_system,
    dependencies,
    discover,
    discover_leading,
    masters_of,
    reduced,
)
from ibpred.elimination.exact_twin import solve_exact
from ibpred.elimination.pruning import prune, take_rows
from ibpred.elimination.system import CoefficientTable, SparseSystem
from ibpred.elimination.table import evaluate_table
from ibpred.errors import InputError
from ibpred.exact.primes import first_primes
from ibpred.kernels.plain import eliminate_plain, evaluate_plain

PRIMES = (3, 101, 65521, 2**31 - 1, first_primes(1)[0])
P, Q = first_primes(2)


def at(system: SparseSystem, point: list[int], prime: int) -> list[dict[int, int]]:
    table = system.table
    values = evaluate_plain(table.exponents.tolist(), table.values.tolist(), point, prime)
    return dictionaries(system, values)


def as_rows(found) -> dict[int, dict[int, int]]:
    return {
        w: {m: int(v) for m, v in zip(found.masters, row, strict=True) if v}
        for w, row in zip(found.wanted, found.values, strict=True)
    }


@pytest.mark.parametrize("prime", PRIMES)
def test_table_agrees_with_integers(prime: int) -> None:
    rng = np.random.default_rng(3)
    table = CoefficientTable(
        ("d", "x", "y"),
        rng.integers(0, 6, (40, 3)),
        rng.integers(-(2**62), 2**62, (25, 40)) * (rng.random((25, 40)) < 0.6),
    )
    points = rng.integers(0, 2**62, (3, 71)).astype(np.uint64)
    got = evaluate_table(table, points, prime)
    assert got.shape == (25, 71)
    for lane in (0, 31, 32, 70):
        point = [int(x) for x in points[:, lane]]
        want = evaluate_plain(table.exponents.tolist(), table.values.tolist(), point, prime)
        assert got[:, lane].tolist() == want


@pytest.mark.parametrize("prime", PRIMES)
def test_same_elimination_as_the_plain_twin(prime: int) -> None:
    for seed in range(6):
        system = random_system(seed, 50, 60, 6)
        point = [7 + seed, 11]
        found = discover(system, point, prime)
        kept, solved = eliminate_plain(at(system, point, prime), prime)
        assert found.kept.tolist() == kept
        assert set(found.pivot.tolist()) == set(solved)
        everything = as_rows(reduced(found, range(60)))
        for column in range(60):
            assert everything[column] == solved.get(column, {column: 1})


def test_reduced_rows_agree_with_dense_reduction_by_flint() -> None:
    rows, columns = 60, 75
    system = random_system(5, rows, columns, 7)
    point = [123456789, 987654321]
    matrix = [[0] * columns for _ in range(rows)]
    for r, row in enumerate(at(system, point, P)):
        for c, v in row.items():
            matrix[r][columns - 1 - c] = v
    dense, rank = nmod_mat(rows, columns, [x for row in matrix for x in row], P).rref()
    found = discover(system, point, P)
    assert found.rank == rank
    everything = as_rows(reduced(found, range(columns)))
    for i in range(rank):
        lead = next(j for j in range(columns) if int(dense[i, j]))
        tail = {columns - 1 - j: -int(dense[i, j]) % P for j in range(lead + 1, columns)}
        assert everything[columns - 1 - lead] == {c: v for c, v in tail.items() if v}


@settings(deadline=None, max_examples=40)
@given(
    seed=st.integers(0, 10**6), rows=st.integers(1, 40), columns=st.integers(1, 30), count=st.integers(1, 4)
)
def test_pruning_keeps_the_wanted_reductions(seed: int, rows: int, columns: int, count: int) -> None:
    system = random_system(seed, rows, columns, 5)
    rng = np.random.default_rng(seed)
    wanted = [int(c) for c in rng.integers(0, columns, count)]
    point = [int(x) for x in rng.integers(1, P, 2)]
    found = discover(system, point, P)
    pruned = prune(system, found, wanted)
    small = reduced(discover(pruned.system, point, P), pruned.wanted)
    large = reduced(found, wanted)
    assert tuple(pruned.columns[list(small.masters)]) == large.masters
    assert np.array_equal(small.values, large.values)
    assert pruned.columns[list(pruned.wanted)].tolist() == wanted
    # every row kept is a row of the system, and they are independent
    assert discover(pruned.system, point, P).rank == pruned.system.rows
    again = take_rows(system, pruned.rows)
    assert pruned.columns[pruned.system.column].tolist() == again.column.tolist()


def test_row_space_does_not_depend_on_the_order_of_rows() -> None:
    system = random_system(9, 36, 40, 6)
    point = [3**20, 5**15]
    first = discover(system, point, P)
    shuffled = np.random.default_rng(0).permutation(system.rows).astype(np.int32)
    second = discover(take_rows(system, shuffled), point, P)
    third = discover_leading(system, point, P)
    assert set(first.pivot) == set(second.pivot) == set(third.pivot)
    rows = [as_rows(reduced(d, range(40))) for d in (first, second, third)]
    assert rows[0] == rows[1] == rows[2]


def test_dependencies_are_enough_and_closed() -> None:
    system = random_system(11, 52, 60, 5)
    point = [17, 10**12]
    found = discover(system, point, P)
    wanted = [55, 50]
    substituted, needed = dependencies(found, wanted)
    part = discover(take_rows(system, found.kept[needed]), point, P)
    assert as_rows(reduced(part, wanted)) == as_rows(reduced(found, wanted))
    assert set(substituted) <= set(found.pivot[needed].tolist())


def test_masters_of_the_massive_bubble() -> None:
    system, place = massive_bubble(5)
    found = discover(system, [10**9 + 7, 998244353], P)
    wanted = [place[2, 1], place[3, 3], place[4, 0], place[1, 1]]
    assert masters_of(found, wanted) == (place[0, 1], place[1, 1])


def test_massive_bubble_against_the_closed_form() -> None:
    # I(2,1) at s = 0 must be the tadpole I(3,0); d/ds of the bubble and symmetry fix
    # (4 - s) I(2,1) = -(d - 3) I(1,1) + I(2,0) (the two identities summed, from the definition)
    system, place = massive_bubble(3)
    exact = solve_exact(system, [place[2, 1], place[2, 0]])
    bubble, tadpole = exact[place[2, 1]][place[1, 1]], exact[place[2, 1]][place[0, 1]]
    ring = bubble.ring
    d, s = ring.variable("d"), ring.variable("s")
    assert bubble * (4 - s) == 3 - d
    assert exact[place[2, 0]][place[0, 1]] == (2 - d) / ring.constant(2)
    assert tadpole * (4 - s) == (2 - d) / ring.constant(2)


def test_modular_and_exact_reductions_agree() -> None:
    for seed in range(4):
        system = random_system(seed, 10, 12, 3)
        wanted = list(range(12))
        exact = solve_exact(system, wanted)
        point = [1234567 + seed, 7654321]
        got = as_rows(reduced(discover(system, point, P), wanted))
        for w in wanted:
            assert got[w] == {c: v.modular(point, P) for c, v in exact[w].items()}


def test_empty_and_trivial_systems() -> None:
    table = CoefficientTable((), np.zeros((1, 0), np.int64), np.array([[1], [0]]))
    empty = SparseSystem(3, np.zeros(1, np.int64), np.empty(0, np.int32), np.empty(0, np.int32), table)
    found = discover(empty, [], P)
    assert found.rank == 0
    assert masters_of(found, [2, 0]) == (0, 2)
    assert masters_of(found, []) == ()
    # a row of zeros, an empty row, and x0 = 0
    other = SparseSystem(
        2, np.array([0, 1, 1, 2]), np.array([1, 0], np.int32), np.array([1, 0], np.int32), table
    )
    found = discover(other, [], P)
    assert found.kept.tolist() == [2]
    assert reduced(found, [0]).masters == ()


def test_input_errors_say_what_is_wrong() -> None:
    system = random_system(1, 5, 5, 3)
    with pytest.raises(InputError, match="odd primes below"):
        discover(system, [1, 2], 2**49 - 1)
    with pytest.raises(InputError, match="variables"):
        discover(system, [1], P)
    with pytest.raises(InputError, match="outside"):
        masters_of(discover(system, [1, 2], P), [5])
    bad = SparseSystem(
        system.columns, system.start, system.column[::-1].copy(), system.coefficient, system.table
    )
    with pytest.raises(ValueError, match="descending"):
        check_system(bad)
    table = CoefficientTable(("d",), np.array([[-1]]), np.array([[1]]))
    with pytest.raises(ValueError, match="negative exponent"):
        evaluate_table(table, np.ones((1, 1), np.uint64), P)
