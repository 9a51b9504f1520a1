from __future__ import annotations

import numpy as np
import pytest
from engine_systems import make_system, massive_bubble, random_system
from hypothesis import given, settings
from hypothesis import strategies as st

from ibpred.elimination.discovery import discover, reduced
from ibpred.elimination.exact_twin import solve_exact
from ibpred.elimination.pruning import prune
from ibpred.elimination.recording import record, record_pruned
from ibpred.elimination.replaying import check_tape, replay
from ibpred.elimination.tape import Tape
from ibpred.errors import InputError, StoreError
from ibpred.exact.primes import first_primes
from ibpred.kernels.plain import replay_plain

P, Q = first_primes(2)


def dense(tape: Tape, values: np.ndarray) -> np.ndarray:
    full = np.zeros((len(tape.wanted), len(tape.masters)), np.uint64)
    full[tape.outputs[:, 0], tape.outputs[:, 1]] = values
    return full


@settings(deadline=None, max_examples=40)
@given(seed=st.integers(0, 10**6), rows=st.integers(1, 50), columns=st.integers(1, 40))
def test_tape_agrees_with_fresh_eliminations(seed: int, rows: int, columns: int) -> None:
    system = random_system(seed, rows, columns, 6)
    rng = np.random.default_rng(seed)
    wanted = [int(c) for c in rng.integers(0, columns, 4)]
    tape = record(system, wanted, [int(x) for x in rng.integers(1, P, 2)], P)
    assert tape.wanted == tuple(wanted)
    for prime in (P, Q, first_primes(1, bits=40)[0]):
        assert check_tape(system, tape, [int(x) for x in rng.integers(1, prime, 2)], prime)
    points = rng.integers(0, Q, (2, 35)).astype(np.uint64)
    values, good = replay(tape, points, Q)
    assert good.all()
    for lane in (0, 34):
        assert values[:, lane].tolist() == replay_plain(tape, points[:, lane].tolist(), Q)


def test_tape_agrees_with_exact_reduction() -> None:
    system, place = massive_bubble(4)
    wanted = [place[4, 3], place[1, 1], place[3, 0]]
    tape = record(system, wanted, [271828182845904, 314159265358979], P)
    exact = solve_exact(system, wanted)
    assert tape.masters == (place[0, 1], place[1, 1])
    points = np.array([[5, 10**14, 77], [9, 3, 10**13]], np.uint64)
    values, good = replay(tape, points, Q)
    assert good.all()
    for lane in range(3):
        table = dense(tape, values[:, lane])
        for i, w in enumerate(wanted):
            for j, m in enumerate(tape.masters):
                want = exact[w].get(m)
                point = points[:, lane].tolist()
                assert int(table[i, j]) == (want.modular(point, Q) if want is not None else 0)


def test_lanes_with_a_vanishing_pivot_are_flagged() -> None:
    # x1 = -x0/(d - 3)
    system = make_system(("d",), [{1: {(1,): 1, (0,): -3}, 0: {(0,): 1}}], 2)
    tape = record(system, [1], [123456789], P)
    points = np.arange(40, dtype=np.uint64).reshape(1, 40)
    values, good = replay(tape, points, P)
    assert good.tolist() == [d != 3 for d in range(40)]
    for d in (0, 4, 39):
        assert int(values[0, d]) == -pow(d - 3, -1, P) % P
    assert replay_plain(tape, [3], P) is None
    assert not check_tape(system, tape, [3], P)


@pytest.mark.parametrize("prime", [5, 101, 65521, 2**31 - 1, Q])
def test_every_size_of_prime(prime: int) -> None:
    system = random_system(21, 45, 60, 6)
    tape = record(system, [59, 56, 50], [987654321987, 123123123123], P)
    points = np.random.default_rng(1).integers(0, prime, (2, 64)).astype(np.uint64)
    values, good = replay(tape, points, prime)
    for lane in range(64):
        plain = replay_plain(tape, points[:, lane].tolist(), prime)
        assert (plain is not None) == bool(good[lane])
        if plain is not None:
            assert values[:, lane].tolist() == plain


def test_long_sums_stay_exact() -> None:
    # x_n = sum of n masters times products: long sums in forward and backward direction
    rng = np.random.default_rng(2)
    rows = []
    for k in range(40):
        row = {40 + k: {(1,): 1, (0,): int(rng.integers(1, 99))}}
        row.update({m: {(0,): int(rng.integers(1, 99)), (1,): 1} for m in range(40)})
        rows.append(row)
    rows.append({c: {(0,): int(rng.integers(1, 99)), (2,): 1} for c in range(20, 90)})
    system = make_system(("d",), rows, 90)
    tape = record(system, [89, 79], [10**14 + 31], P)
    assert check_tape(system, tape, [10**13 + 37], Q)
    largest = np.array([[P - 1, P // 2, P // 2 + 1, 1]], np.uint64)
    values, good = replay(tape, largest, P)
    for lane in range(4):
        plain = replay_plain(tape, largest[:, lane].tolist(), P)
        assert plain is None if not good[lane] else values[:, lane].tolist() == plain


def test_a_definition_row_gives_a_linear_quantity() -> None:
    # q = I0 + 3 d I1 for two reducible integrals of the bubble, as the most complicated column
    system, place = massive_bubble(3)
    rows = []
    exponents = [tuple(e) for e in system.table.exponents.tolist()]
    for r in range(system.rows):
        part = slice(int(system.start[r]), int(system.start[r + 1]))
        rows.append(
            {
                int(c): {
                    e: int(v) for e, v in zip(exponents, system.table.values[k].tolist(), strict=True) if v
                }
                for c, k in zip(system.column[part], system.coefficient[part], strict=True)
            }
        )
    q = system.columns
    rows.append({q: {(0, 0): 1}, place[2, 2]: {(0, 0): -1}, place[3, 1]: {(1, 0): -3}})
    extended = make_system(("d", "s"), rows, q + 1)
    point = [10**12 + 1, 10**11 + 3]
    tape = record(extended, [q], point, P)
    both = reduced(discover(system, point, P), [place[2, 2], place[3, 1]])
    values, _ = replay(tape, np.array(point, np.uint64).reshape(2, 1), P)
    combined = [(int(a) + 3 * point[0] * int(b)) % P for a, b in both.values.T]
    assert tape.masters == both.masters
    assert dense(tape, values[:, 0])[0].tolist() == combined


def test_wanted_masters_and_nothing_wanted() -> None:
    system, place = massive_bubble(2)
    tape = record(system, [place[1, 1]], [10**12 + 1, 10**11 + 3], P)
    values, good = replay(tape, np.ones((2, 3), np.uint64), P)
    assert tape.outputs.tolist() == [[0, 0]]
    assert values.tolist() == [[1, 1, 1]]
    assert good.all()
    empty = record(system, [], [10**12 + 1, 10**11 + 3], P)
    values, good = replay(empty, np.ones((2, 3), np.uint64), P)
    assert values.shape == (0, 3)


def test_a_wrong_tape_is_found_out() -> None:
    # recorded where an entry vanishes (d = 4): wrong elsewhere
    system = make_system(
        ("d",),
        [
            {1: {(0,): 1}, 0: {(0,): 1}},
            {3: {(0,): 1}, 2: {(0,): 1}, 1: {(1,): 1, (0,): -4}},
        ],
        4,
    )
    good = record(system, [3], [10**13 + 7], P)
    assert check_tape(system, good, [10**12 + 7], Q)
    from dataclasses import replace

    bad = replace(good, input_value=good.input_value + 1)
    assert not check_tape(system, bad, [10**12 + 7], Q)


def test_same_input_same_bytes() -> None:
    system = random_system(21, 45, 60, 6)
    point = [10**14 + 31, 10**13 + 37]
    first = record(system, [59, 50], point, P)
    second = record(system, [59, 50], point, P)
    assert first.digest() == second.digest()
    pruned = prune(system, discover(system, point, P), [59, 50])
    assert record_pruned(pruned, point, P).digest() == first.digest()


def test_arrays_round_trip_and_damage_is_found() -> None:
    system = random_system(21, 45, 60, 6)
    tape = record(system, [59, 54], [10**14 + 31, 10**13 + 37], P)
    arrays = tape.to_arrays()
    again = Tape.from_arrays(arrays)
    assert again.digest() == tape.digest()
    assert again.variables == ("d", "x")
    assert check_tape(system, again, [5**20, 7**10], Q)
    damaged = dict(arrays)
    damaged["product"] = arrays["product"].copy()
    damaged["product"][0, 0] += 1
    with pytest.raises(StoreError, match="damaged"):
        Tape.from_arrays(damaged)
    with pytest.raises(StoreError, match="format"):
        Tape.from_arrays({**arrays, "format": np.array([99])})
    del damaged["unit"]
    with pytest.raises(StoreError, match="lacks unit"):
        Tape.from_arrays(damaged)


def test_replay_checks_its_input() -> None:
    tape = record(random_system(1, 9, 8, 3), [7], [10**14 + 31, 10**13 + 37], P)
    with pytest.raises(InputError, match="do not fit"):
        replay(tape, np.ones((3, 4), np.uint64), P)
    with pytest.raises(InputError, match="odd primes"):
        replay(tape, np.ones((2, 4), np.uint64), 2**61 - 1)


def test_recording_needs_a_large_prime() -> None:
    with pytest.raises(InputError, match="recorded modulo a prime above"):
        record(random_system(1, 9, 8, 3), [7], [5, 6], 65521)
