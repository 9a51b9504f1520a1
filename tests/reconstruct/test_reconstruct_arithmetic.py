"""Modular arithmetic, univariate fractions, lifting, supports: against definitions."""

from __future__ import annotations

from fractions import Fraction
from itertools import product
from math import gcd

import flint
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from ibpred.errors import ReconstructionError
from ibpred.exact.primes import first_primes
from ibpred.reconstruct.exponentials import exponential_coefficients
from ibpred.reconstruct.lift import chinese_remainder, rational_number, rational_vector
from ibpred.reconstruct.modular import (
    add,
    interpolate,
    invert,
    lagrange_coefficients,
    matrix_product,
    monomials,
    multiply,
    power_table,
    subtract,
)
from ibpred.reconstruct.support import UNBOUNDED, monomials_within, shared_systems, size_within, universe
from ibpred.reconstruct.univariate import polynomial, rational_function, values_of, vanishing_polynomial

PRIMES = [*first_primes(2), *first_primes(1, bits=50), 2**31 - 1, 101]


def residue_array(draw_from: np.random.Generator, shape: tuple[int, ...], prime: int) -> np.ndarray:
    values = draw_from.integers(0, prime, size=shape, dtype=np.uint64)
    edge = draw_from.random(shape) < 0.1
    values[edge] = prime - 1
    return values


@pytest.mark.parametrize("prime", PRIMES)
def test_elementwise_arithmetic_against_integers(prime: int) -> None:
    random = np.random.default_rng(1)
    a, b = residue_array(random, (2000,), prime), residue_array(random, (2000,), prime)
    big_a, big_b = a.astype(object), b.astype(object)
    assert (multiply(a, b, prime).astype(object) == big_a * big_b % prime).all()
    assert (add(a, b, prime).astype(object) == (big_a + big_b) % prime).all()
    assert (subtract(a, b, prime).astype(object) == (big_a - big_b) % prime).all()
    a[a == 0] = 1
    assert (multiply(a, invert(a, prime), prime) == 1).all()


@pytest.mark.parametrize("prime", PRIMES)
@pytest.mark.parametrize("shape", [(3, 5, 2), (1, 0, 4), (40, 70, 33)])
def test_matrix_product_against_integers(prime: int, shape: tuple[int, int, int]) -> None:
    random = np.random.default_rng(2)
    m, k, n = shape
    a, b = residue_array(random, (m, k), prime), residue_array(random, (k, n), prime)
    expected = (a.astype(object) @ b.astype(object)) % prime if k else np.zeros((m, n), dtype=object)
    assert (matrix_product(a, b, prime).astype(object) == expected).all()


def test_matrix_product_is_exact_for_long_sums() -> None:
    prime = PRIMES[2]
    long = np.full((1, 200_000), prime - 1, dtype=np.uint64)
    assert int(matrix_product(long, long.T.copy(), prime)[0, 0]) == 200_000 % prime


def test_lagrange_coefficients_invert_the_vandermonde_matrix() -> None:
    prime = PRIMES[0]
    nodes = np.random.default_rng(3).integers(0, prime, size=23, dtype=np.uint64)
    vandermonde = power_table(nodes, 22, prime)
    identity = np.eye(23, dtype=np.uint64)
    assert (matrix_product(lagrange_coefficients(nodes, prime), vandermonde, prime) == identity).all()


def test_interpolation_returns_the_polynomial() -> None:
    prime = PRIMES[0]
    nodes = np.random.default_rng(4).integers(0, prime, size=12, dtype=np.uint64)
    poly = polynomial(list(range(5, 17)), prime)
    assert interpolate(nodes, values_of(poly, nodes)[None, :], prime)[0].tolist() == list(range(5, 17))


def test_monomials_against_powers() -> None:
    prime = 10007
    exponents = np.array([[0, 0], [3, 1], [0, 7]])
    points = np.array([[2, 10006], [5, 3]], dtype=np.uint64)
    expected = [
        [pow(int(x), int(a), prime) * pow(int(y), int(b), prime) % prime for x, y in points.T]
        for a, b in exponents
    ]
    assert monomials(exponents, points, prime).tolist() == expected


@given(st.integers(0, 6), st.integers(0, 6), st.integers(0, 2**32))
@settings(max_examples=60, deadline=None)
def test_univariate_fraction_is_found_exactly_with_enough_samples(above: int, below: int, seed: int) -> None:
    prime = PRIMES[0]
    random = np.random.default_rng(seed)
    numerator = polynomial(residue_array(random, (above + 1,), prime), prime)
    denominator = polynomial([*residue_array(random, (below,), prime), 1], prime)
    common = numerator.gcd(denominator)
    numerator, denominator = numerator / common, denominator / common
    needed = max(numerator.degree(), 0) + denominator.degree() + 3
    for count, found in ((needed - 1, False), (needed, True)):
        nodes = random.integers(0, prime, size=count, dtype=np.uint64)
        values = multiply(values_of(numerator, nodes), invert(values_of(denominator, nodes), prime), prime)
        image = polynomial(interpolate(nodes, values[None, :], prime)[0], prime)
        result = rational_function(vanishing_polynomial(nodes, prime), image)
        assert (result is not None) == found
        if result is not None:
            assert result == (numerator, denominator)


def test_random_values_are_no_rational_function() -> None:
    prime = PRIMES[0]
    random = np.random.default_rng(6)
    nodes, values = (random.integers(0, prime, size=40, dtype=np.uint64) for _ in range(2))
    image = polynomial(interpolate(nodes, values[None, :], prime)[0], prime)
    assert rational_function(vanishing_polynomial(nodes, prime), image) is None


@given(st.integers(-(10**40), 10**40), st.integers(1, 10**40))
@settings(max_examples=100, deadline=None)
def test_rational_number_from_residue(numerator: int, denominator: int) -> None:
    value = Fraction(numerator, denominator)
    modulus = 1
    for prime in first_primes(8):
        modulus *= prime
    residue = value.numerator * pow(value.denominator, -1, modulus) % modulus
    assert rational_number(residue, modulus) == (value.numerator, value.denominator)


def test_random_residues_are_not_believed() -> None:
    prime = PRIMES[0]
    random = np.random.default_rng(7)
    believed = sum(rational_number(int(r), prime) is not None for r in random.integers(0, prime, size=3000))
    assert believed <= 2  # the chance is about 2^-20 * log2(prime) each


@given(st.lists(st.fractions(max_denominator=60), max_size=8))
@settings(max_examples=100, deadline=None)
def test_vector_has_one_least_denominator(values: list[Fraction]) -> None:
    values = [value % 1000 for value in values]
    primes = first_primes(6)
    modulus, residues = 1, [0] * len(values)
    for prime in primes:
        new = [v.numerator * pow(v.denominator, -1, prime) % prime for v in values]
        residues = chinese_remainder(residues, modulus, new, prime)
        modulus *= prime
    result = rational_vector(residues, modulus)
    assert result is not None
    numbers, common = result
    assert [Fraction(n, common) for n in numbers] == values
    assert not values or gcd(common, *numbers) == 1


@given(st.lists(st.integers(0, 4), min_size=1, max_size=4), st.integers(0, 9), st.integers(0, 9))
@settings(max_examples=60, deadline=None)
def test_monomials_within_bounds_against_enumeration(degrees: list[int], total: int, lowest: int) -> None:
    expected = [list(e) for e in product(*(range(k + 1) for k in degrees)) if lowest <= sum(e) <= total]
    assert monomials_within(degrees, total, lowest).tolist() == expected


def test_too_many_monomials_is_said() -> None:
    with pytest.raises(ReconstructionError, match="monomials"):
        monomials_within([40] * 6, 240)


@given(
    st.lists(st.integers(0, 4), min_size=3, max_size=3),
    st.integers(0, 10),
    st.lists(st.integers(0, 6), min_size=2, max_size=2),
)
def test_mixed_bounds_against_enumeration(degrees: list[int], total: int, mixed: list[int]) -> None:
    subsets = ((0, 2), (1, 2))
    expected = [
        list(e)
        for e in product(*(range(d + 1) for d in degrees))
        if sum(e) <= total and all(e[i] + e[j] <= m for (i, j), m in zip(subsets, mixed, strict=True))
    ]
    bounds = list(zip(subsets, mixed, strict=True))
    assert monomials_within(degrees, total, mixed=bounds).tolist() == expected
    exponents, (share, whole) = universe(
        np.array([[*degrees, total]] * 2), subsets, np.array([mixed, [UNBOUNDED, UNBOUNDED]])
    )
    assert exponents[share].tolist() == expected
    assert len(whole) == size_within(degrees, total)


def test_universe_holds_each_rows_monomials() -> None:
    bounds = np.array([[2, 0, 2], [0, 3, 3], [2, 0, 2], [0, 0, -1]])
    exponents, shares = universe(bounds)
    assert len(exponents) == 6
    for row, share in zip(bounds, shares, strict=True):
        assert exponents[share].tolist() == monomials_within(row[:-1].tolist(), int(row[-1])).tolist()


def test_shared_systems_hold_every_support_and_save_work() -> None:
    random = np.random.default_rng(3)
    supports = [np.sort(random.choice(30, size, replace=False)) for size in random.integers(0, 10, 40)]
    supports += [np.arange(20), np.arange(19), np.arange(20)]
    systems = shared_systems(supports, 30, 21)
    rows = [row for _, members in systems for row in members]
    assert sorted(rows) == list(range(len(supports)))
    for support, members in systems:
        assert len(support) <= 21
        for row in members:
            assert set(supports[row]) <= set(support)
    cost = sum((len(members) + 1) * len(support) ** 2 for support, members in systems)
    assert cost <= sum(2 * len(support) ** 2 for support in supports)
    assert any({40, 41, 42} <= set(members) for _, members in systems)


@pytest.mark.parametrize("count", [0, 1, 7, 40])
@pytest.mark.parametrize("rows", [1, 60])
@pytest.mark.parametrize("gaps", [(), (0,), (3, 5, 41), (42, 43)])
def test_sums_of_exponentials(count: int, rows: int, gaps: tuple[int, ...]) -> None:
    """Known coefficients come back, from any good samples; a wrong sample is noticed."""
    prime = first_primes(1)[0]
    random = np.random.default_rng(count + rows)
    nodes = np.unique(random.integers(1, prime, size=count, dtype=np.uint64))
    length = count + len(gaps) + 2
    gaps = tuple(gap for gap in gaps if gap < length)
    good = np.ones(length, dtype=np.bool_)
    good[list(gaps)] = False
    wanted = random.integers(0, prime, size=(rows, count), dtype=np.uint64)
    values = [
        [
            sum(int(c) * pow(int(v), j, prime) for c, v in zip(row, nodes, strict=True)) % prime
            for j in range(length)
        ]
        for row in wanted
    ]
    sequence = np.array(values, dtype=np.uint64).reshape(rows, length)
    sequence[:, ~good] = 12345
    found, fits = exponential_coefficients(sequence, good, nodes, prime)
    assert np.array_equal(found, wanted)
    assert fits.all()
    place = int(np.nonzero(good)[0][-1])
    sequence[0, place] = (int(sequence[0, place]) + 1) % prime
    _, fits = exponential_coefficients(sequence, good, nodes, prime)
    assert not fits[0]
    assert fits[1:].all()


def test_vanishing_polynomial() -> None:
    nodes = np.array([3, 5, 7], dtype=np.uint64)
    expected = flint.nmod_poly([-3, 1], 101) * flint.nmod_poly([-5, 1], 101) * flint.nmod_poly([-7, 1], 101)
    assert vanishing_polynomial(nodes, 101) == expected
