"""Exact local analysis: partial fractions, gauges, spectra, formal solutions with logarithms."""

from __future__ import annotations

from fractions import Fraction

import flint
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from ibpred.balls.context import precision
from ibpred.errors import UnfinishedError
from ibpred.numerics.frobenius.formal import SingularPoint, formal_class, singular_point
from ibpred.numerics.frobenius.gauge import gauged, simple_pole_gauge
from ibpred.numerics.frobenius.poles import partial_fractions, row_space
from ibpred.numerics.frobenius.spectrum import spectrum
from ibpred.numerics.frobenius.system import (
    RationalSystem,
    adjoint,
    fmpq,
    inverted,
    rational_system,
    shifted,
)
from ibpred.numerics.frobenius.tracks import tracks_around

small = st.integers(-3, 3)


def poly(*coefficients: int | Fraction) -> object:
    return flint.fmpq_poly([fmpq(c) for c in coefficients])


def fuchsian(residues: dict[int, list[list[int]]]) -> RationalSystem:
    """``sum_p R_p/(x - p)``."""
    size = len(next(iter(residues.values())))
    entries = []
    for point, matrix in residues.items():
        for i, row in enumerate(matrix):
            for j, value in enumerate(row):
                if value:
                    entries.append((i, j, poly(value), poly(-point, 1)))
    return rational_system(size, entries)


def value_at(system: RationalSystem, x: Fraction) -> dict[tuple[int, int], object]:
    place = fmpq(x)
    return {at: p(place) / q(place) for at, (p, q) in system.entries.items()}


@st.composite
def matrices(draw: st.DrawFn, size: int) -> list[list[int]]:
    return [[draw(small) for _ in range(size)] for _ in range(size)]


@given(matrices(3), matrices(3), st.integers(2, 9))
@settings(max_examples=30, deadline=None)
def test_inversion_and_shift_are_changes_of_variable(r0, r1, number) -> None:
    system = fuchsian({0: r0, 1: r1})
    x = Fraction(number, 7) + 2
    for at, value in value_at(inverted(system), 1 / x).items():
        assert value == -value_at(system, x)[at] * fmpq(x) ** 2
    assert value_at(shifted(system, Fraction(1, 3)), x - Fraction(1, 3)) == value_at(system, x)
    assert value_at(adjoint(system), x) == {(j, i): -v for (i, j), v in value_at(system, x).items()}


def test_partial_fractions_give_the_system_back() -> None:
    # a double pole, an irreducible quadratic factor squared, and a polynomial part
    system = rational_system(
        2,
        [
            (0, 0, poly(1, 2, 3), poly(0, 0, 1)),
            (0, 1, poly(1, 0, 0, 0, 0, 1), poly(2, 2, 1) ** 2),
            (1, 0, poly(4, 0, 1), poly(-3, 1) * poly(2, 2, 1)),
            (1, 1, poly(0, 1, 1), poly(1)),
        ],
    )
    fractions = partial_fractions(system)
    with precision(200):
        centre, scale = flint.acb(1) / 3, flint.arb(2)
        tracks = tracks_around(fractions, centre, scale, 200)
        t = flint.acb(1) / 7
        total = flint.acb_mat(2, 2)
        for track in tracks.tracks:
            for k, columns in enumerate(track.columns, start=1):
                total = total + columns * track.rows * (1 / (t - track.position) ** k)
        for j, matrix in enumerate(tracks.polynomial):
            total = total + matrix * t**j
        x = Fraction(1, 3) + 2 * Fraction(1, 7)
        exact = value_at(system, x)
        for i in range(2):
            for j in range(2):
                difference = total[i, j] - flint.arb(exact.get((i, j), flint.fmpq(0))) * scale
                assert difference.contains(0)
                assert difference.abs_upper() < flint.arb(2) ** -180


@given(st.lists(st.lists(small, min_size=4, max_size=4), min_size=1, max_size=5))
@settings(max_examples=40, deadline=None)
def test_row_space_spans_and_is_a_unit_matrix_in_its_pivots(rows) -> None:
    matrix = flint.fmpq_mat(rows)
    basis, pivots = row_space(matrix, [1.0] * 4, [1.0] * len(rows))
    rank = matrix.rank()
    assert len(pivots) == rank
    for i in range(rank):
        for j, column in enumerate(pivots):
            assert basis[i, column] == int(i == j)
    if rank:
        together = flint.fmpq_mat([*matrix.table(), *basis.table()])
        assert together.rank() == rank


def test_row_space_of_nearly_dependent_rows_stays_small() -> None:
    tiny = Fraction(1, 10**9)
    matrix = flint.fmpq_mat([[fmpq(tiny), flint.fmpq(1), flint.fmpq(2)]])
    basis, pivots = row_space(matrix, [1.0] * 3, [1.0])
    assert pivots == (2,)
    assert all(abs(value) <= 1 for value in basis.entries())


def test_gauge_removes_a_double_pole() -> None:
    simple = fuchsian({0: [[1, 2], [3, 4]], 1: [[0, 1], [1, 0]]})
    rough = gauged(simple, (2, 0))
    assert min(q.degree() for _, q in rough.entries.values()) >= 1
    found = simple_pole_gauge(rough, "zero")
    again = gauged(rough, found)
    for p, q in again.entries.values():
        assert q[0] != 0 or q[1] != 0, "a simple pole at most"
        assert p.gcd(q).degree() == 0


def test_irregular_point_is_reported() -> None:
    irregular = rational_system(2, [(0, 1, poly(1), poly(0, 0, 1)), (1, 0, poly(1), poly(0, 0, 1))])
    with pytest.raises(UnfinishedError, match="poles of higher order"):
        simple_pole_gauge(irregular, "zero")


def test_irrational_exponent_is_reported() -> None:
    with pytest.raises(UnfinishedError, match="not rational"):
        spectrum(flint.fmpq_mat([[0, 2], [1, 0]]), "zero")


@given(matrices(4))
@settings(max_examples=40, deadline=None)
def test_spectrum_decomposes(matrix) -> None:
    # an integer triangular matrix in another basis has integer exponents
    upper = flint.fmpq_mat(
        [[value if j >= i else 0 for j, value in enumerate(r)] for i, r in enumerate(matrix)]
    )
    change = flint.fmpq_mat([[int(i == j) + int(j < i) * 2 for j in range(4)] for i in range(4)])
    residue = change * upper * change.inv()
    found = spectrum(residue, "zero")
    diagonal = flint.fmpq_mat(
        [[fmpq(e) if i == j else 0 for j in range(4)] for i, e in enumerate(found.exponents)]
    )
    assert found.basis * (diagonal + found.nilpotent) * found.inverse == residue
    assert diagonal * found.nilpotent == found.nilpotent * diagonal
    power = found.nilpotent
    for _ in range(3):
        power = power * found.nilpotent
    assert not any(power.entries())


def residual(
    point: SingularPoint, system: RationalSystem, residue_class: Fraction, count: int
) -> list[object]:
    """Coefficients of ``x f' - x A f`` for the formal solutions, from the definition."""
    formal = formal_class(point, residue_class, count)
    size, basis = point.size, point.spectrum.basis
    # Taylor coefficients of x A by power series division over Q
    taylor = [flint.fmpq_mat(size, size) for _ in range(count)]
    for (i, j), (p, q) in system.entries.items():
        top, bottom = (p * poly(0, 1)).coeffs(), q.coeffs()
        while bottom[0] == 0:
            assert top[0] == 0
            top, bottom = top[1:], bottom[1:]
        series: list[object] = []
        for n in range(count):
            total = top[n] if n < len(top) else flint.fmpq(0)
            for k in range(1, min(n, len(bottom) - 1) + 1):
                total -= bottom[k] * series[n - k]
            series.append(total / bottom[0])
            taylor[n][i, j] = series[n]
    left = []
    for n in range(count):
        depth = max(len(levels) for levels in formal.terms)
        levels = [*formal.terms[n]] + [flint.fmpq_mat(size, formal.solutions)] * (
            depth + 1 - len(formal.terms[n])
        )
        for k in range(depth):
            value = basis * levels[k] * fmpq(formal.exponent + n) + basis * levels[k + 1]
            for m in range(n + 1):
                if k < len(formal.terms[m]):
                    value = value - taylor[n - m] * basis * formal.terms[m][k]
            left += value.entries()
    return left


@given(matrices(3), matrices(3), st.lists(st.integers(-2, 2), min_size=3, max_size=3))
@settings(max_examples=40, deadline=None)
def test_formal_solutions_solve_resonant_systems(upper, other, diagonal) -> None:
    # integer exponents: all resonances occur, with logarithms of any depth
    for i in range(3):
        for j in range(3):
            upper[i][j] = diagonal[i] if i == j else upper[i][j] if j > i else 0
    system = fuchsian({0: upper, 2: other})
    point = singular_point(system, "zero")
    assert point.gauge == (0, 0, 0)
    formal = formal_class(point, Fraction(0), 6)
    assert formal.solutions == 3
    assert not any(residual(point, system, Fraction(0), 6))
    # they are independent: the leading terms of the solutions span all columns
    stacked = flint.fmpq_mat([row for levels in formal.terms for level in levels for row in level.table()])
    assert stacked.rank() == 3
