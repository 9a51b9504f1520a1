"""Derivatives of integrals in the invariants as templates."""

from __future__ import annotations

from collections.abc import Sequence

from ibpred.exact.rational import Rational, Ring
from ibpred.family.definition import FamilyDefinition
from ibpred.identities.products import Products, internal, products_of
from ibpred.identities.templates import Coefficients, Template, add_quotient, make_template

Matrix = list[list[Rational]]


def derivative_templates(family: FamilyDefinition) -> dict[str, Template]:
    """``d I / d v`` for every invariant and squared mass v, the unit included.

    The derivative acts on the external momenta by ``sum_ij beta_ij p_j . d/dp_i`` with beta chosen
    such that every product p_a.p_b changes as the kinematics says, and on the constants of the
    lines directly. (After the derivative the unit is set to one.)
    """
    products = products_of(family)
    return {v.name: _derivative(products, v.name) for v in family.invariants}


def _derivative(products: Products, name: str) -> Template:
    family, ring = products.family, products.ring
    n = len(family.lines)
    beta = [[internal(value, family) for value in row] for row in momentum_operator(family, name)]
    combination: Coefficients = {}
    for a, line in enumerate(family.lines):
        inner: dict[int, Rational] = {}
        for i in range(len(family.loops)):
            for e in range(len(family.external)):
                if not line.linear[i][e]:
                    continue
                for j, value in enumerate(beta[e]):
                    if value:
                        index = products.loop_external(i, j)
                        inner[index] = inner.get(index, ring.zero) + value * line.linear[i][e]
        constant = internal(line.constant.derivative(name), family)
        add_quotient(combination, n, a, products.to_lines(constant, inner), -1, ring)
    return make_template(f"d/d{name}", combination, n, ring)


def momentum_operator(family: FamilyDefinition, name: str) -> Matrix:
    """The matrix beta with ``beta G + G beta^T = dG/dv``, as sparse as elimination leaves it.

    There is always one, also for a singular Gram matrix G: its rank does not change with v, so G moves
    along its orbit under ``G -> B G B^T``.
    """
    legs = len(family.external)
    ring = family.kinematic_ring
    gram = family.gram
    rows: Matrix = []
    for a in range(legs):
        for b in range(a, legs):
            row = [ring.zero] * (legs * legs + 1)
            for j in range(legs):
                row[a * legs + j] = row[a * legs + j] + gram[j][b]
                row[b * legs + j] = row[b * legs + j] + gram[j][a]
            row[-1] = gram[a][b].derivative(name)
            rows.append(row)
    solution = particular_solution(rows, legs * legs, ring)
    return [solution[i * legs : (i + 1) * legs] for i in range(legs)]


def particular_solution(rows: Sequence[Sequence[Rational]], unknowns: int, ring: Ring) -> list[Rational]:
    """One solution of a linear system (right-hand side last in each row), free unknowns zero.

    Raises
    ------
    ValueError
        If there is none.
    """
    work = [list(row) for row in rows]
    pivots: list[int] = []
    for column in range(unknowns):
        at = len(pivots)
        candidates = [r for r in range(at, len(work)) if work[r][column]]
        if not candidates:
            continue
        # the shortest row as pivot keeps the fractions small
        best = min(candidates, key=lambda r: sum(map(bool, work[r])))
        work[at], work[best] = work[best], work[at]
        scale = work[at][column]
        work[at] = [value / scale if value else value for value in work[at]]
        for r, row in enumerate(work):
            factor = row[column]
            if r != at and factor:
                work[r] = [x - factor * y if y else x for x, y in zip(row, work[at], strict=True)]
        pivots.append(column)
    if any(row[unknowns] for row in work[len(pivots) :]):
        raise ValueError("the linear system has no solution")
    solution = [ring.zero] * unknowns
    for row, column in zip(work, pivots, strict=False):
        solution[column] = row[unknowns]
    return solution
