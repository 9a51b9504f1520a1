"""The exponents of an epsilon-form: eigenvalues of its residues at each singular point."""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction

from ibpred.epsform.blocks import slope_condition
from ibpred.epsform.form import EpsilonForm
from ibpred.epsform.places import place
from ibpred.epsform.residues.decompose import exact_matrix


def eigenvalue_texts(matrix: Sequence[Sequence[Fraction]]) -> tuple[str, ...]:
    """Eigenvalues as text, with multiplicity; conjugate ones together as ``b with (polynomial) = 0``."""
    rational: list[Fraction] = []
    other: list[str] = []
    for factor, power in exact_matrix(matrix).charpoly().factor()[1]:
        coefficients = [Fraction(int(c.p), int(c.q)) for c in factor.coeffs()]
        monic = [c / coefficients[-1] for c in coefficients]
        if len(monic) == 2:
            rational.extend([-monic[0]] * int(power))
        else:
            other.extend([f"b with {slope_condition(monic)}"] * int(power))
    return (*map(str, sorted(rational)), *sorted(other))


def residue_at_infinity(form: EpsilonForm) -> tuple[tuple[Fraction, ...], ...]:
    """Residue in 1/x of a form in one ratio: minus the sum of the others, weighted by their degrees."""
    size, name = len(form.transformation), form.variables[0]
    total = [[Fraction(0)] * size for _ in range(size)]
    for letter, matrix in zip(form.letters, form.matrices, strict=True):
        weight = place(letter.numerator, form.ring, name).degree
        for i, row in enumerate(matrix):
            for j, value in enumerate(row):
                total[i][j] -= weight * value
    return tuple(map(tuple, total))


def exponents(form: EpsilonForm) -> tuple[tuple[str, tuple[str, ...]], ...]:
    """Coefficients of eps in the local exponents at each singular place.

    Returns
    -------
    table
        (place, eigenvalues as text); near a letter l = 0 the canonical functions behave like
        ``l^(eps lambda)``. For forms in one ratio x infinity comes last, with behaviour
        ``(1/x)^(eps lambda)``.
    """
    table = []
    for letter, matrix in zip(form.letters, form.matrices, strict=True):
        name = next(v for v in form.variables if v in letter.variables())
        table.append((place(letter.numerator, form.ring, name).text(), eigenvalue_texts(matrix)))
    if len(form.variables) == 1:
        table.append((f"{form.variables[0]} = infinity", eigenvalue_texts(residue_at_infinity(form))))
    return tuple(table)
