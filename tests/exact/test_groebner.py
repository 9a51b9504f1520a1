"""Gröbner bases modulo a prime against another implementation and against counts of points."""

from __future__ import annotations

from itertools import product

import pytest
import sympy
from hypothesis import given, settings
from hypothesis import strategies as st

from ibpred.exact.groebner import TooLargeError, groebner_basis, order_key, quotient_dimension

PRIME = 32003
VARIABLES = sympy.symbols("x y z")

monomial = st.tuples(*[st.integers(0, 2)] * 3).filter(lambda e: sum(e) <= 3)
polynomial = st.dictionaries(monomial, st.integers(1, PRIME - 1), min_size=1, max_size=4)


def as_sympy(terms):
    total = sympy.Integer(0)
    for exponents, c in terms.items():
        total += c * sympy.prod(v**e for v, e in zip(VARIABLES, exponents, strict=True))
    return total


@given(st.lists(polynomial, min_size=1, max_size=3))
@settings(max_examples=40, deadline=None)
def test_leading_monomials_against_another_implementation(system) -> None:
    ours = groebner_basis(system, PRIME, 10**6)
    theirs = sympy.groebner([as_sympy(p) for p in system], *VARIABLES, modulus=PRIME, order="grevlex")
    leads = sorted(max(p, key=order_key) for p in ours)
    assert leads == sorted(max(sympy.Poly(p, *VARIABLES).monoms(), key=order_key) for p in theirs.exprs)


def test_points_of_a_grid() -> None:
    """x^3 - x, y^2 - y, z - x y has six points; the points with x = 1 are two."""
    system = [
        {(3, 0, 0): 1, (1, 0, 0): PRIME - 1},
        {(0, 2, 0): 1, (0, 1, 0): PRIME - 1},
        {(0, 0, 1): 1, (1, 1, 0): PRIME - 1},
    ]
    assert quotient_dimension(groebner_basis(system, PRIME, 10**5), 3) == 6
    edge = {(1, 0, 0): 1, (0, 0, 0): PRIME - 1}
    assert quotient_dimension(groebner_basis([*system, edge], PRIME, 10**5), 3) == 2


def test_unit_ideal_line_and_multiplicity() -> None:
    assert quotient_dimension(groebner_basis([{(1,): 1}, {(1,): 1, (0,): 5}], PRIME, 10**5), 1) == 0
    assert quotient_dimension(groebner_basis([{(1, 1): 1}], PRIME, 10**5), 2) is None
    assert quotient_dimension(groebner_basis([{(4,): 7}], PRIME, 10**5), 1) == 4
    assert groebner_basis([{}], PRIME, 10) == ()


def test_limit() -> None:
    dense = [{e: 1 + sum(e) + i for e in product(range(3), repeat=3)} for i in range(3)]
    with pytest.raises(TooLargeError):
        groebner_basis(dense, PRIME, 20)
