"""Identities as templates: shifts of the powers with coefficients linear in the powers.

A template stands for ``weight * quantity(a) = sum_t c_t(a) I(a + shift_t)`` for every vector a of powers,
with ``c_t(a) = sum_m (sum_b values[t, m, b] a_b + values[t, m, n]) monomial_m``.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ibpred.errors import UnfinishedError
from ibpred.exact.rational import Polynomial, Rational, Ring
from ibpred.family.definition import FamilyDefinition
from ibpred.identities.products import LineSum, Products, products_of

LARGEST = 2**40
"""Bound on a template's integers: with powers below 2^20 every product stays within 64 bits."""

Shift = tuple[int, ...]
Coefficients = dict[Shift, list[Rational]]
"""For each shift the coefficients of the n powers, then the constant."""


@dataclass(frozen=True)
class Template:
    """One identity, or one linear operator on integrals, for all powers at once.

    Attributes
    ----------
    name
        For messages, e.g. ``d/dk1.(p2)`` or ``d/ds``.
    monomials
        Exponents over the internal ring's variables (d first).
    shifts
        int64, (terms, lines), distinct.
    values
        int64, (terms, monomials, lines + 1): coefficients of the powers, then the constant.
    weight
        int64, (monomials,): the quantity's coefficient; zero for an identity.
    """

    name: str
    monomials: tuple[tuple[int, ...], ...]
    shifts: NDArray[np.int64]
    values: NDArray[np.int64]
    weight: NDArray[np.int64]

    @property
    def terms(self) -> int:
        return len(self.shifts)


def add_quotient(
    into: Coefficients, lines: int, line: int, numerator: LineSum, factor: int, ring: Ring
) -> None:
    """Add ``factor * a_line * numerator / D_line`` to a combination of shifted integrals."""
    up = [0] * lines
    up[line] = 1

    def add(shift: Shift, value: Rational) -> None:
        if value:
            row = into.setdefault(shift, [ring.zero] * (lines + 1))
            row[line] = row[line] + value * factor

    add(tuple(up), numerator.constant)
    for b, value in enumerate(numerator.coefficients):
        shift = list(up)
        shift[b] -= 1
        add(tuple(shift), value)


def common_denominator(values: Iterable[Rational], ring: Ring) -> Polynomial:
    """Least common multiple of the denominators, as an integer polynomial."""
    common = ring.context.constant(1)
    for value in values:
        den = value.denominator
        if not den.is_one():
            common = common * (den / common.gcd(den))
    return common


def make_template(
    name: str, coefficients: Mapping[Shift, list[Rational]], lines: int, ring: Ring
) -> Template:
    """Clear denominators and store a combination as integers.

    Raises
    ------
    UnfinishedError
        If the integers are too large for the engine.
    """
    kept = {shift: row for shift, row in sorted(coefficients.items()) if any(row)}
    common = common_denominator((value for row in kept.values() for value in row), ring)
    weight = {tuple(map(int, e)): int(c) for e, c in common.to_dict().items()}
    monomials: dict[tuple[int, ...], int] = {}
    entries: list[tuple[int, int, int, int]] = []
    for t, row in enumerate(kept.values()):
        for b, value in enumerate(row):
            polynomial = value.numerator * (common / value.denominator)
            for exponents, c in polynomial.to_dict().items():
                m = monomials.setdefault(tuple(map(int, exponents)), len(monomials))
                entries.append((t, m, b, int(c)))
    for exponents in weight:
        monomials.setdefault(exponents, len(monomials))
    largest = max([abs(entry[3]) for entry in entries] + [abs(c) for c in weight.values()])
    if largest > LARGEST:
        raise UnfinishedError(
            f"identity {name}: an integer coefficient {largest} is too large for the engine; "
            "simplify the numbers in the family's lines and equations"
        )
    values = np.zeros((len(kept), len(monomials), lines + 1), dtype=np.int64)
    for t, m, b, c in entries:
        values[t, m, b] = c
    total = np.zeros(len(monomials), dtype=np.int64)
    for exponents, c in weight.items():
        total[monomials[exponents]] = c
    shifts = np.array(list(kept), dtype=np.int64).reshape(len(kept), lines)
    return Template(name, tuple(monomials), shifts, values, total)


def as_identity(template: Template) -> Template:
    """The template with quantity zero."""
    weight = np.zeros_like(template.weight)
    return Template(template.name, template.monomials, template.shifts, template.values, weight)


def ibp_templates(family: FamilyDefinition) -> tuple[Template, ...]:
    """The L (L + E) integration-by-parts identities ``int d/dk_i . (q F) = 0``.

    q runs over the loop and the external momenta, F is the product of the lines to minus their
    powers (Chetyrkin, Tkachov, Nucl. Phys. B192 (1981) 159). Identities from Lorentz invariance
    follow from these (Lee, arXiv:0804.3008) and are not listed.

    Raises
    ------
    InputError
        If the lines do not determine all scalar products.
    """
    products = products_of(family)
    momenta = (*family.loops, *family.external)
    found = []
    for i, loop in enumerate(family.loops):
        for j, momentum in enumerate(momenta):
            combination = _integration_by_parts(products, i, j)
            if combination:
                name = f"d/d{loop}.({momentum})"
                template = make_template(name, combination, len(family.lines), products.ring)
                found.append(as_identity(template))
    return tuple(found)


def _integration_by_parts(products: Products, i: int, j: int) -> Coefficients:
    family, ring = products.family, products.ring
    loops, n = len(family.loops), len(family.lines)
    combination: Coefficients = {}
    if i == j:
        row = [ring.zero] * (n + 1)
        row[n] = ring.variable("d")
        combination[(0,) * n] = row
    for a, line in enumerate(family.lines):
        constant = ring.zero
        inner: dict[int, Rational] = {}

        def add(index: int, value: Rational, inner: dict[int, Rational] = inner) -> None:
            inner[index] = inner.get(index, ring.zero) + value

        for m in range(loops):
            if line.quadratic[i][m]:
                index = products.loop_loop(m, j) if j < loops else products.loop_external(m, j - loops)
                add(index, ring.constant(2 * line.quadratic[i][m]))
        for e in range(len(family.external)):
            if line.linear[i][e]:
                if j < loops:
                    add(products.loop_external(j, e), ring.constant(line.linear[i][e]))
                else:
                    constant = constant + products.gram[e][j - loops] * line.linear[i][e]
        add_quotient(combination, n, a, products.to_lines(constant, inner), -1, ring)
    return combination
