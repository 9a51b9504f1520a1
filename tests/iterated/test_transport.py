"""Transport matrices against the connection formulas of Gauss' hypergeometric function.

``F = 2F1(a eps, b eps; 1 + c eps; z)``, ``f = (F, z F'/eps)`` obeys an eps-form with letters z and z - 1.
"""

from __future__ import annotations

from collections.abc import Mapping
from fractions import Fraction
from typing import Any

import flint
import pytest

from ibpred.boundary.conditions.eigen import eigenspaces
from ibpred.errors import BoundaryError
from ibpred.iterated.constants.constants import ZERO, Constant, log_of, zeta
from ibpred.iterated.constants.matrices import MatrixSeries
from ibpred.iterated.constants.series import exponential
from ibpred.iterated.transport import INFINITY, Point, connection, residue_at

A, B, C = Fraction(2), Fraction(-1, 3), Fraction(1, 2)


def matrices(a: Fraction, b: Fraction, c: Fraction) -> tuple[Any, Any]:
    def q(value: Fraction) -> Any:
        return flint.fmpq(value.numerator, value.denominator)

    at_zero = flint.fmpq_mat([[q(Fraction(0)), q(Fraction(1))], [q(Fraction(0)), q(-c)]])
    at_one = flint.fmpq_mat([[q(Fraction(0)), q(Fraction(0))], [q(-a * b), q(c - a - b)]])
    return at_zero, at_one


def gamma_ratio(order: int, above: tuple[Fraction, ...], below: tuple[Fraction, ...]) -> tuple[Constant, ...]:
    """``prod Gamma(1 + p eps) / prod Gamma(1 + q eps)`` where sum p = sum q."""
    assert sum(above) == sum(below)
    exponents = [ZERO, ZERO]
    for k in range(2, order + 1):
        factor = sum((-p) ** k for p in above) - sum((-q) ** k for q in below)
        exponents.append(zeta(k) * (factor / k) if factor else ZERO)
    return exponential(exponents[: order + 1]).coefficients


def part(transport: MatrixSeries, residue: Any, value: Fraction) -> list[Constant]:
    """First component of the projection of ``Z (1, 0)`` on an eigenspace, order by order."""
    (space,) = (s for s in eigenspaces(residue) if s.value == value)
    projector = space.chain[0]
    result = []
    for k in range(len(transport.orders)):
        total = ZERO
        for j in range(2):
            factor = Fraction(int(projector[0, j].p), int(projector[0, j].q))
            total = total + transport.entry(k, j, 0) * factor
        result.append(total)
    return result


@pytest.mark.parametrize("letter", [Fraction(1), Fraction(-1), Fraction(4), Fraction(-2, 3)])
def test_gauss_sum(letter: Fraction) -> None:
    order = 7
    at_zero, at_one = matrices(A, B, C)
    residues = {Fraction(0): at_zero, letter: at_one}
    transport = connection(residues, letter, order)
    expected = gamma_ratio(order, (C, C - A - B), (C - A, C - B))
    assert tuple(part(transport, at_one, Fraction(0))) == expected


@pytest.mark.parametrize("letter", [Fraction(-1), Fraction(-4)])
def test_connection_to_infinity(letter: Fraction) -> None:
    order = 6
    at_zero, at_one = matrices(A, B, C)
    residues = {Fraction(0): at_zero, letter: at_one}
    transport = connection(residues, INFINITY, order)
    infinite = residue_at(residues, INFINITY)
    for a, b in ((A, B), (B, A)):
        # z = -x/|letter|, so z^(-a eps) brings |letter|^(a eps)
        scale = exponential([ZERO, log_of(-letter) * a] + [ZERO] * (order - 1)).coefficients
        gammas = gamma_ratio(order, (C, b - a), (b, C - a))
        expected = []
        for k in range(order + 1):
            total = sum((scale[j] * gammas[k - j] for j in range(k + 1)), ZERO)
            expected.append(total * (b / (b - a)))
        assert part(transport, infinite, a) == expected


def test_alternating_letters_by_squaring() -> None:
    """z = x^2 has the letters 0, 1, -1."""
    order = 5
    at_zero, at_one = matrices(A, B, C)
    residues = {Fraction(0): 2 * at_zero, Fraction(1): at_one, Fraction(-1): at_one}
    expected = gamma_ratio(order, (C, C - A - B), (C - A, C - B))
    for target in (Fraction(1), Fraction(-1)):
        transport = connection(residues, target, order)
        assert tuple(part(transport, at_one, Fraction(0))) == expected


def test_letters_zero_one_two_by_squaring() -> None:
    """z = x (2 - x) has the letters 0, 2 and the double letter 1."""
    order = 5
    at_zero, at_one = matrices(A, B, C)
    residues = {Fraction(0): at_zero, Fraction(2): at_zero, Fraction(1): 2 * at_one}
    transport = connection(residues, Fraction(1), order)
    expected = gamma_ratio(order, (C, C - A - B), (C - A, C - B))
    assert tuple(part(transport, 2 * at_one, Fraction(0))) == expected


def test_half_turn() -> None:
    """With one letter the transport to -1 is the power of x: x^(eps A) = e^(i pi eps A) there."""
    matrix = flint.fmpq_mat([[2, 1], [0, 2]])
    transport = connection({Fraction(0): matrix}, Fraction(-1), 3)
    turn = Constant.generator("I") * Constant.generator("pi")
    assert transport.entry(1, 0, 0) == turn * 2
    assert transport.entry(2, 0, 1) == turn * turn * 2


@pytest.mark.parametrize(
    ("letters", "target", "message"),
    [
        ((0, 1), INFINITY, "meets the singular point x = 1"),
        ((0, -1, -5), Fraction(-1), "not known here"),
        ((0, -5), Fraction(-5), "log5"),
        ((0, 1), Fraction(0), "another point"),
    ],
)
def test_what_is_not_available(letters: tuple[int, ...], target: Point, message: str) -> None:
    matrix = flint.fmpq_mat([[1, 1], [0, 1]])
    residues: Mapping[Fraction, Any] = {Fraction(a): matrix for a in letters}
    with pytest.raises(BoundaryError, match=message):
        connection(residues, target, 2)
