"""Functions that are even or odd under a symmetry of the variable, such as w -> 1/w on a double cover.

Masters that depend on w through x(w) alone are not changed by the involution s that exchanges the two points
over x. Canonical functions are then carried into each other, ``f(s(w)) = M f(w)`` with ``M^2 = 1``; in the
basis of eigenvectors of M they have a parity, as functions with a square root and without it should.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import replace
from fractions import Fraction
from typing import Any

import flint

from ibpred.epsform.form import EpsilonForm
from ibpred.epsform.matrices import Constants, lifted, product
from ibpred.epsform.residues.decompose import conjugated, constants, exact_matrix, null_space
from ibpred.exact.rational import Rational


def involution(values: Iterable[Rational], name: str) -> Rational | None:
    """One of ``1/w, -w, -1/w`` that leaves all the given functions of w unchanged, if there is one."""
    given = list(values)
    if not given:
        return None
    w = given[0].ring.variable(name)
    if not any(name in value.variables() for value in given):
        return None
    for image in (1 / w, -w, -1 / w):
        if all(value.substitute({name: image}) == value for value in given):
            return image
    return None


def with_parity(form: EpsilonForm, name: str, image: Rational) -> EpsilonForm:
    """The form in functions of definite parity; unchanged where the symmetry is not rational in them.

    Parameters
    ----------
    form
        Without square roots.
    name
        The variable.
    image
        The involution as a function of the variable.
    """
    ring, size = form.ring, len(form.transformation)
    moved = tuple(tuple(e.substitute({name: image}) if e else e for e in row) for row in form.inverse)
    monodromy = product(moved, form.transformation, ring)
    if not all(entry.is_constant() for row in monodromy for entry in row):
        return form
    matrix = exact_matrix([[entry.to_fraction() for entry in row] for row in monodromy])
    change = _eigenvectors(matrix, size)
    if change is None:
        return form
    back = constants(exact_matrix(change).inv())
    return replace(
        form,
        matrices=tuple(conjugated(m, change) for m in form.matrices),
        transformation=product(form.transformation, lifted(ring, change), ring),
        inverse=product(lifted(ring, back), form.inverse, ring),
    )


def _eigenvectors(matrix: Any, size: int) -> Constants | None:
    """K with ``K^-1 M K`` diagonal: column i is the eigenvector nearest to the unit vector i.

    ``(1 + e M)/2`` projects on the eigenspace of e = 1 or -1, so the columns of both projectors span
    everything; column i is taken from the projector that leaves more of the unit vector i.
    """
    unit = flint.fmpq_mat(size, size, [int(i == j) for i in range(size) for j in range(size)])
    if matrix * matrix != unit:
        return None
    half = flint.fmpq(1, 2)
    even, odd = (unit + matrix) * half, (unit - matrix) * half
    columns: list[list[Fraction]] = []
    tables = constants(even), constants(odd)
    for i in range(size):
        first, second = tables if tables[0][i][i] >= tables[1][i][i] else tables[::-1]
        for table in (first, second):
            column = [table[k][i] for k in range(size)]
            if _independent([*columns, column]):
                columns.append([value / table[i][i] if table[i][i] else value for value in column])
                break
        else:
            return None
    return tuple(zip(*columns, strict=True))


def _independent(columns: list[list[Fraction]]) -> bool:
    return not null_space(exact_matrix([list(row) for row in zip(*columns, strict=True)]))
