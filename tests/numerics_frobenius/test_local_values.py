"""Values of local solutions against hypergeometric functions, matrix exponentials and themselves."""

from __future__ import annotations

from fractions import Fraction
from itertools import pairwise

import flint
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from ibpred.balls.context import complex_ball, precision
from ibpred.errors import PointError, PrecisionError
from ibpred.numerics.frobenius.basis import in_basis, small_basis
from ibpred.numerics.frobenius.continuation import carried
from ibpred.numerics.frobenius.formal import formal_class, singular_point
from ibpred.numerics.frobenius.layers import Layers
from ibpred.numerics.frobenius.majorant import Tail, majorant
from ibpred.numerics.frobenius.path import planned, straight
from ibpred.numerics.frobenius.poles import partial_fractions
from ibpred.numerics.frobenius.series import Local, frobenius_values, taylor_step
from ibpred.numerics.frobenius.system import RationalSystem, fmpq, rational_system
from ibpred.numerics.frobenius.tracks import tracks_around
from ibpred.numerics.frobenius.weights import perron_weights

BITS = 220


def poly(*coefficients: int | Fraction) -> object:
    return flint.fmpq_poly([fmpq(c) for c in coefficients])


def hypergeometric(a: Fraction, b: Fraction, c: Fraction) -> RationalSystem:
    """The system of (y, y') for ``x(1-x) y'' + (c - (a+b+1) x) y' - a b y = 0``."""
    bottom = poly(0, 1, -1)
    return rational_system(
        2, [(0, 1, poly(1), poly(1)), (1, 0, poly(a * b), bottom), (1, 1, -poly(c, -a - b - 1), bottom)]
    )


def gauss(a: Fraction, b: Fraction, c: Fraction, x: object) -> tuple[object, object]:
    """2F1 and its derivative."""
    first, second, third = (flint.acb(flint.arb(fmpq(v))) for v in (a, b, c))
    value = x.hypgeom_2f1(first, second, third)
    slope = x.hypgeom_2f1(first + 1, second + 1, third + 1) * first * second / third
    return value, slope


def side_by_side(parts: list) -> object:
    """Matrices as one, their columns in order."""
    return flint.acb_mat([[v for part in parts for v in part.table()[i]] for i in range(parts[0].nrows())])


parameters = st.fractions(min_value=-2, max_value=2, max_denominator=5)


@given(parameters, parameters, st.integers(1, 4), st.integers(-6, 6), st.integers(-6, 6))
@settings(max_examples=25, deadline=None)
def test_taylor_step_holds_the_hypergeometric_function(a, b, c, re, im) -> None:
    c = Fraction(c, 3)
    with precision(BITS):
        start = flint.acb(flint.arb(2) / 5, flint.arb(1) / 7)
        end = start + flint.acb(flint.arb(re), flint.arb(im)) / 45
        values = flint.acb_mat([[v] for v in gauss(a, b, c, start)])
        found = taylor_step(partial_fractions(hypergeometric(a, b, c)), start, end, values, BITS)
        for ball, value in zip(found.entries(), gauss(a, b, c, end), strict=True):
            assert (ball - value).contains(0)
            assert ball.rad() < flint.arb(10) ** -50


@pytest.mark.parametrize("c", [Fraction(1), Fraction(2), Fraction(1, 3), Fraction(-1)])
def test_frobenius_solutions_hold_the_regular_one(c: Fraction) -> None:
    # c = 1, 2, -1: logarithms at the origin
    a, b = Fraction(1, 3), Fraction(1, 2)
    system = hypergeometric(a, b, c)
    point = singular_point(system, "zero")
    assert sum(formal_class(point, k, 2).solutions for k in point.spectrum.classes()) == 2
    columns = []
    with precision(BITS):
        x = flint.acb(1) / 5
        for k in point.spectrum.classes():
            local = Local(point, formal_class(point, k, 3))
            columns.append(frobenius_values(local, x, x.log(), None, BITS))
        matrix = side_by_side(columns)
        # carried to another point by the system, they are the local solutions there
        y = flint.acb(1) / 4
        moved = taylor_step(partial_fractions(system), x, y, matrix, BITS)
        again = [
            frobenius_values(Local(point, formal_class(point, k, 3)), y, y.log(), None, BITS)
            for k in point.spectrum.classes()
        ]
        there = side_by_side(again)
        for u, v in zip(moved.entries(), there.entries(), strict=True):
            assert (u - v).contains(0)
            assert (u - v).abs_upper() < flint.arb(10) ** -50
        if c > 0:
            target = flint.acb_mat([[v] for v in gauss(a, b, c, x)])
            constants = matrix.solve(target)
            at_y = there * constants
            for u, v in zip(at_y.entries(), gauss(a, b, c, y), strict=True):
                assert (u - v).contains(0)
                assert (u - v).abs_upper() < flint.arb(10) ** -45


def test_euler_system_is_a_matrix_power() -> None:
    # f' = R/x f with a Jordan block, resonances and a tiny difference of exponents
    tiny = Fraction(1, 10**6)
    rows = [[1, 1, 0, 0], [0, 1, 0, 0], [0, 0, 0, 1], [0, 0, 0, tiny]]
    entries = [(i, j, poly(v), poly(0, 1)) for i, row in enumerate(rows) for j, v in enumerate(row) if v]
    point = singular_point(rational_system(4, entries), "zero")
    residue = flint.fmpq_mat([[fmpq(v) for v in row] for row in rows])

    def fundamental(x: object) -> object:
        parts = [
            frobenius_values(Local(point, formal_class(point, k, 2)), x, x.log(), None, BITS)
            for k in point.spectrum.classes()
        ]
        return side_by_side(parts)

    with precision(BITS):
        x, y = flint.acb(1) / 3, flint.acb(2) / 5
        expected = (flint.acb_mat(residue) * (y / x).log()).exp() * fundamental(x)
        for u, v in zip(fundamental(y).entries(), expected.entries(), strict=True):
            assert (u - v).contains(0)
            assert (u - v).abs_upper() < flint.arb(10) ** -50


def test_monodromy_around_a_point_has_the_exponents_of_its_residue() -> None:
    a, b, c = Fraction(1, 3), Fraction(1, 5), Fraction(3, 4)
    fractions = partial_fractions(hypergeometric(a, b, c))
    corners = [
        (Fraction(1, 2) * x, Fraction(1, 2) * y) for x, y in ((1, 0), (0, 1), (-1, 0), (0, -1), (1, 0))
    ]
    with precision(BITS):
        start = flint.acb_mat([[1, 0], [0, 1]])
        values = start
        for here, there in pairwise(corners):
            path = straight([0j, 1 + 0j], here, there)
            assert path is not None
            values = carried(fractions, path, values, BITS)
        # local exponents 0 and 1 - c
        phase = (flint.acb(flint.arb(fmpq(1 - c))) * 2).exp_pi_i()
        assert (values.trace() - 1 - phase).contains(0)
        assert (values.det() - phase).contains(0)
        assert values.trace().rad() < flint.arb(10) ** -40


def test_tail_bounds_the_remainder() -> None:
    # f' = m/(1 - t) f, f = (1 - t)^-m
    m = 7
    system = rational_system(1, [(0, 0, poly(-m), poly(-1, 1))])
    with precision(100):
        tracks = tracks_around(partial_fractions(system), flint.acb(0), flint.arb(1), 100)
        bounds = majorant(tracks, 60)
        tail = Tail(bounds, 0.0)
        value, partial = flint.arb(1), flint.arb(0)
        t = flint.arb(1) / 2
        for n in range(60):
            partial = partial + value * t**n
            tail.add(bounds.norm(flint.acb_mat([[value]])))
            value = value * (n + m) / (n + 1)
        truth = (1 - t) ** (-m) - partial
        bound = tail.remainder(59, t)
        assert bound is not None
        assert truth <= bound * float(bounds.weights[0])
        assert bound <= truth * 4


def test_weights_make_graded_matrices_small() -> None:
    matrix = np.array([[1.0, 0.0, 0.0], [1e10, 2.0, 1e-12], [1e25, 1e12, 1.0]])
    weights = perron_weights(matrix)
    assert (matrix @ weights / weights).max() < 12


def test_step_beyond_the_disc_is_refused() -> None:
    fractions = partial_fractions(hypergeometric(Fraction(1, 2), Fraction(1, 3), Fraction(1)))
    with precision(64):
        values = flint.acb_mat([[1], [1]])
        with pytest.raises(PrecisionError, match="smaller steps"):
            taylor_step(fractions, flint.acb(1) / 2, flint.acb(2), values, 64)


def test_paths_step_inside_the_discs_on_the_side_asked_for() -> None:
    poles = [0j, 1 + 0j, 2 + 0j, 0.5 + 5j]
    start, end = (Fraction(-1), Fraction(0)), (Fraction(3), Fraction(0))
    for side in (1, -1):
        path = planned(poles, start, end, side)
        assert path[0] == start
        assert path[-1] == end
        assert all(side * y >= 0 for _, y in path)
        for (x0, y0), (x1, y1) in pairwise(path):
            here, there = complex(x0, y0), complex(x1, y1)
            assert abs(there - here) < 0.51 * min(abs(here - pole) for pole in poles)
    with pytest.raises(PointError, match="choose a side"):
        planned(poles, start, end, 0)


def test_both_sides_of_a_branch_point_are_conjugate() -> None:
    a, b, c = Fraction(1, 3), Fraction(1, 2), Fraction(1)
    fractions = partial_fractions(hypergeometric(a, b, c))
    start, end = (Fraction(1, 2), Fraction(0)), (Fraction(2), Fraction(0))
    with precision(BITS):
        values = flint.acb_mat([[v] for v in gauss(a, b, c, complex_ball(*start, BITS))])
        above = carried(fractions, planned([0j, 1 + 0j], start, end, 1), values, BITS)
        below = carried(fractions, planned([0j, 1 + 0j], start, end, -1), values, BITS)
        # FLINT takes the principal value on the cut from below: 2F1(x - i0)
        truth = flint.acb(2).hypgeom_2f1(flint.acb(1) / 3, flint.acb(1) / 2, 1)
        assert (above[0, 0] - below[0, 0].conjugate()).contains(0)
        assert (truth - above[0, 0]).contains(0) or (truth - below[0, 0]).contains(0)
        assert above[0, 0].imag.abs_lower() > 0.1


def test_small_basis_undoes_a_bad_one():
    # two small residues, hidden by a change of basis: their sum of moduli falls back to a few units
    residues = [flint.fmpq_mat([[0, 1], [0, 1]]), flint.fmpq_mat([[1, 0], [1, 0]])]
    change = flint.fmpq_mat([[1, 50], [0, 1]])
    x = flint.fmpq_poly([0, 1])
    entries = []
    for residue, factor in zip(residues, (x, x - 1), strict=True):
        hidden = change * residue * change.inv()
        entries += [(i, j, hidden[i, j] * flint.fmpq_poly([1]), factor) for i in range(2) for j in range(2)]
    system = rational_system(2, entries)
    basis = small_basis(partial_fractions(system))
    (found,) = in_basis(Layers(2, (system,)), basis, basis.inv()).matrices
    before = sum(abs(float(p(2) / q(2))) for p, q in system.entries.values())
    after = sum(abs(float(p(2) / q(2))) for p, q in found.entries.values())
    assert before > 1000
    assert after < 10
