"""Canonical forms written down by hand for the tests."""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from pathlib import Path

from ibpred.epsform.form import EpsilonForm
from ibpred.exact.rational import Rational, ring
from ibpred.family.definition import FamilyDefinition
from ibpred.family.reading import read_family

FIELD = ring(("eps", "x"))
EPS, X = FIELD.variable("eps"), FIELD.variable("x")
FAMILIES = Path(__file__).parents[2] / "families"


def family(name: str) -> FamilyDefinition:
    path = FAMILIES / f"{name}.toml"
    return read_family(path.read_text(encoding="utf-8"), path.name, name)


def diagonal_form(
    factors: Sequence[Rational], letters: Sequence[Rational], matrices: Sequence[Sequence[Sequence[object]]]
) -> EpsilonForm:
    """``f_i = factor_i I_i``."""
    size = range(len(factors))
    inverse = tuple(tuple(factors[i] if i == j else FIELD.zero for j in size) for i in size)
    forward = tuple(tuple(1 / factors[i] if i == j else FIELD.zero for j in size) for i in size)
    exact = tuple(tuple(tuple(Fraction(str(v)) for v in row) for row in matrix) for matrix in matrices)
    return EpsilonForm(("x",), FIELD, tuple(letters), exact, forward, inverse, ((),) * len(factors))


BOX_MASTERS = ((1, 0, 1, 0), (0, 1, 0, 1), (1, 1, 1, 1))


def box_form(sign: int = 1) -> EpsilonForm:
    """Massless box, x = t/s; the box's own exponent at x = -1 times `sign` (wrong for -1)."""
    return diagonal_form(
        (1 - 2 * EPS, 1 - 2 * EPS, EPS * X),
        (X, X + 1),
        (((0, 0, 0), (0, -1, 0), (0, 2, -1)), ((0, 0, 0), (0, 0, 0), (-2, -2, sign))),
    )


DOUBLE_BOX_MASTERS = (
    (0, 0, 1, 1, 1, 0, 0, 0, 0),
    (0, 1, 0, 1, 0, 0, 1, 0, 0),
    (1, 0, 1, 0, 1, 1, 0, 0, 0),
    (0, 1, 0, 1, 1, 1, 0, 0, 0),
    (1, 1, 1, 1, 0, 0, 1, 0, 0),
    (0, 1, 1, 1, 1, 0, 1, 0, 0),
    (1, 1, 1, 1, 1, 1, 1, 0, 0),
    (1, 1, 1, 1, 1, 1, 1, -1, 0),
)


def double_box_form() -> EpsilonForm:
    """Planar double box, x = t/s;
    basis as in Henn, arXiv:1304.1806, up to factors; matrices from the chain."""
    sunrise = EPS * (1 - 2 * EPS) * (1 - 3 * EPS) * (2 - 3 * EPS)
    factors = (
        sunrise,
        sunrise / X,
        EPS**2 * (1 - 2 * EPS) ** 2,
        EPS**2 * (1 - 2 * EPS) * (1 - 3 * EPS),
        EPS**3 * (1 - 2 * EPS),
        EPS**4 * (1 + X),
        EPS**4 * X,
        EPS**4,
    )
    at_zero = (
        (0, 0, 0, 0, 0, 0, 0, 0),
        (0, -2, 0, 0, 0, 0, 0, 0),
        (0, 0, 0, 0, 0, 0, 0, 0),
        (0, 0, 0, 0, 0, 0, 0, 0),
        (0, -1, 0, 1, -2, 0, 0, 0),
        (-1, 1, 0, 0, 0, -2, 0, 0),
        (6, 6, 0, -6, 12, 12, -2, 0),
        (6, 9, -1, "-15/2", 12, 18, -1, 1),
    )
    at_minus_one = (
        (0, 0, 0, 0, 0, 0, 0, 0),
        (0, 0, 0, 0, 0, 0, 0, 0),
        (0, 0, 0, 0, 0, 0, 0, 0),
        (0, 0, 0, 0, 0, 0, 0, 0),
        (0, 1, 0, -1, 1, 0, 0, 0),
        (0, 0, 0, 0, 0, 2, 0, 0),
        (-12, -6, -2, 3, -12, -12, 2, -2),
        (-6, -9, -1, "15/2", -12, -18, 1, -1),
    )
    return diagonal_form(factors, (X, X + 1), (at_zero, at_minus_one))


TWO = ring(("eps", "x", "y"))
LEG_BOX_MASTERS = ((1, 0, 1, 0), (1, 0, 0, 1), (0, 1, 0, 1), (1, 1, 1, 1))


def leg_box_form() -> EpsilonForm:
    """Box with one off-shell leg, x = t/s, y = p4^2/s; matrices from the chain."""
    eps, x, y = (TWO.variable(name) for name in ("eps", "x", "y"))
    factors = (1 - 2 * eps, 1 - 2 * eps, 1 - 2 * eps, eps * x)
    size = range(4)
    entries = {
        x: {(2, 2): -1, (3, 3): -1},
        x - y: {(3, 1): -2, (3, 2): 2},
        x - y + 1: {(3, 0): -2, (3, 1): 2, (3, 2): -2, (3, 3): 1},
        y: {(1, 1): -1, (3, 1): 2},
        y - 1: {(3, 0): 2, (3, 1): -2},
    }
    matrices = tuple(
        tuple(tuple(Fraction(found.get((i, j), 0)) for j in size) for i in size) for found in entries.values()
    )
    forward = tuple(tuple(1 / factors[i] if i == j else TWO.zero for j in size) for i in size)
    inverse = tuple(tuple(factors[i] if i == j else TWO.zero for j in size) for i in size)
    return EpsilonForm(("x", "y"), TWO, tuple(entries), matrices, forward, inverse, ((),) * 4)
