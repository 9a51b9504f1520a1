"""The steps on the way to an epsilon-form, each against its definition."""

from __future__ import annotations

from fractions import Fraction
from random import Random

import flint
from hypothesis import given, settings
from hypothesis import strategies as st
from synthetic_systems import RING, matrix, scrambled

from ibpred.epsform.blocks import Block, exponent_text, linear
from ibpred.epsform.diagonal.single import solve_single
from ibpred.epsform.lattices.intertwine import closure, intertwiners, representative
from ibpred.epsform.lattices.pencil import Pencil, at_infinity, pole_order, shift, unit_frame
from ibpred.epsform.lattices.sampling import Sample, reconstruct_in_eps
from ibpred.epsform.lattices.sections import global_sections, splitting_type
from ibpred.epsform.lattices.spectrum import spectrum
from ibpred.epsform.matrices import identity, inverse, product
from ibpred.epsform.obstructions.picardfuchs import picard_fuchs
from ibpred.epsform.places import places_of
from ibpred.epsform.residues.constant import constant_term
from ibpred.epsform.residues.content import content
from ibpred.epsform.residues.decompose import commutant, conjugated, decomposed, exact_matrix
from ibpred.epsform.structure import coupled_blocks
from ibpred.exact.grammar import parse_rational
from ibpred.exact.primes import first_primes

PRIMES = first_primes(6, bits=62)
P = PRIMES[0]


def rational(text: str):
    return parse_rational(text, RING)


def test_places_are_sorted_and_named() -> None:
    found = places_of([rational("1/((x^2+1)*(x+1)*x*(x-eps)*(1-2*eps))")], RING, "x")
    assert [place.text() for place in found] == ["x = 0", "x = -1", "x^2+1 = 0", "eps-x = 0"]
    assert [place.moves for place in found] == [False, False, False, True]


@settings(max_examples=25, deadline=None)
@given(st.lists(st.integers(-9, 9), min_size=4, max_size=4))
def test_residue_field_of_a_quadratic_place(numbers: list[int]) -> None:
    (place,) = places_of([rational("1/(x^2+eps*x+3)")], RING, "x")
    eps = RING.variable("eps")
    left = (RING.constant(numbers[0]), eps * numbers[1] + 1)
    right = (eps + numbers[2], RING.constant(numbers[3]))
    whole = place.multiply(left, right)
    assert whole == place.reduce((place.lift(left) * place.lift(right)).numerator)
    assert place.divide(whole, right) == left


def test_principal_part() -> None:
    (place,) = places_of([rational("1/(2*x-1)^2")], RING, "x")
    assert place.principal(rational("(eps+x)/(2*x-1)^2"), 2) == (rational("eps+1/2"),)
    assert place.principal(rational("(eps+x)/(2*x-1)"), 2) == (RING.zero,)


@settings(max_examples=30, deadline=None)
@given(
    st.lists(st.integers(-5, 5), min_size=1, max_size=4),
    st.lists(st.integers(-5, 5), min_size=1, max_size=4),
    st.integers(0, 3),
)
def test_constant_term_is_that_of_the_laurent_series(above: list[int], below: list[int], order: int) -> None:
    below = [below[0] or 1, *below[1:]]
    eps = RING.variable("eps")
    value = sum((eps**k * c for k, c in enumerate(above)), RING.zero)
    value = value / (sum((eps**k * c for k, c in enumerate(below)), RING.zero) * eps**order)
    # independent: eps^0 of the series by FLINT's power series division
    top = flint.fmpq_series(above, prec=order + 1)
    series = top / flint.fmpq_series(below, prec=order + 1)
    expected = series[order]
    assert constant_term(value) == Fraction(int(expected.p), int(expected.q))


def test_content_is_the_common_factor_in_eps() -> None:
    values = [rational("eps^2*(1-2*eps)*(x+eps)/(x-1)"), rational("6*eps*(1-2*eps)*x/(1+eps)"), RING.zero]
    common = content(values, RING)
    assert common in (rational("eps*(1-2*eps)/(1+eps)"), rational("-eps*(1-2*eps)/(1+eps)"))


def test_exponent_texts() -> None:
    assert exponent_text(linear(Fraction(-1), Fraction(2))) == "-1+2*eps"
    assert exponent_text(linear(Fraction(0), Fraction(-1))) == "-eps"
    assert exponent_text(linear(Fraction(1, 2), Fraction(0))) == "1/2"


@settings(max_examples=30, deadline=None)
@given(
    st.lists(st.tuples(st.integers(-6, 6), st.integers(-6, 6)), min_size=1, max_size=5), st.integers(0, 99)
)
def test_spectrum_reads_exponents_back(pairs: list[tuple[int, int]], seed: int) -> None:
    eps = Random(seed).randrange(2, P)
    polynomial = flint.nmod_poly([1], P)
    for a, b in pairs:
        polynomial = polynomial * flint.nmod_poly([-(a + b * eps) % P, 1], P)
    found = spectrum(polynomial, eps, None)
    assert found is not None
    read = sorted(e.exponent for e in found for _ in range(e.multiplicity))
    assert read == sorted(linear(Fraction(a), Fraction(b)) for a, b in pairs)


def test_spectrum_at_a_number_needs_the_slopes() -> None:
    eps = pow(7, -1, P)
    polynomial = flint.nmod_poly([-(1 + 2 * eps) % P, 1], P)
    slopes = frozenset({(Fraction(-2), Fraction(1))})
    found = spectrum(polynomial, eps, slopes)
    assert found is not None
    assert found[0].exponent == linear(Fraction(1), Fraction(2))


def test_sections_of_a_given_bundle() -> None:
    """The frame diag(y^-2, y^1, 1) at infinity is the bundle O(2) + O(-1) + O(0)."""
    one, zero, y = flint.nmod_poly([1], P), flint.nmod_poly([], P), shift(0, P)
    frame = unit_frame(3, P)
    frame = type(frame)(
        P,
        ((one, zero, zero), (zero, y**3, zero), (zero, zero, y**2)),
        y**2,
        ((y**3, zero, zero), (zero, one, zero), (zero, zero, y)),
        y,
    )
    assert splitting_type(frame) == (2, 0, -1)
    assert len(global_sections(frame, 0)) == 3 + 0 + 1
    assert len(global_sections(frame, 1)) == 4 + 1 + 2


def test_infinity_twice_is_the_identity() -> None:
    x = shift(0, P)
    pencil = Pencil(P, ((x + 3, x**2), (x * 0 + 5, x)), x**2 * (x - 7) ** 3)
    back = at_infinity(at_infinity(pencil))
    for row, new in zip(pencil.numerators, back.numerators, strict=True):
        for a, b in zip(row, new, strict=True):
            assert a * back.denominator == b * pencil.denominator
    assert pole_order(pencil, 7) == 3


def test_functions_of_eps_are_rebuilt() -> None:
    texts = ["(1-2*eps)^3/(1+3*eps)/7", "0", "123456789123456789*eps^2", "5/11"]
    functions = [rational(t) for t in texts]

    def sampler(eps: int, prime: int) -> Sample:
        return Sample("shape", tuple(f.modular([eps, 1], prime) for f in functions))

    found = reconstruct_in_eps(sampler, PRIMES, 3, RING, "test")
    assert list(found.functions) == functions


def test_intertwiners_solve_their_equations() -> None:
    random = Random(4)
    size = 4
    blocks = [range(0, 1), range(1, 3), range(3, 4)]
    lower = [[j < block.stop for j in range(size)] for block in blocks for _ in block]

    def sample() -> flint.nmod_mat:
        flat = [random.randrange(P) if lower[i][j] else 0 for i in range(size) for j in range(size)]
        return flint.nmod_mat(size, size, flat, P)

    right, change = [sample() for _ in range(3)], sample()
    left = [change * a * change.inv() for a in right]
    basis = intertwiners(left, right, blocks, closure(lower, blocks), seed=1)
    assert not isinstance(basis, range)
    assert len(basis) == 1
    found = representative(basis, 1)
    assert all(b * found == found * a for a, b in zip(right, left, strict=True))
    # residues that are not conjugate: the first block that fails is named
    left[0][0, 0] = int(left[0][0, 0]) + 1
    assert intertwiners(left, right, blocks, closure(lower, blocks), seed=1) == blocks[0]


def test_direct_sums_are_found() -> None:
    change = ((1, 2, 0), (1, 3, 1), (0, 1, 2))
    change = tuple(tuple(map(Fraction, row)) for row in change)
    first = tuple(tuple(map(Fraction, row)) for row in ((1, 2, 0), (0, 3, 0), (0, 0, 5)))
    second = tuple(tuple(map(Fraction, row)) for row in ((0, 0, 0), (1, 1, 0), (0, 0, 2)))
    mixed = [conjugated(a, change) for a in (first, second)]
    assert len(commutant(mixed)) == 2
    basis, parts = decomposed(mixed, 1)
    assert sorted(map(len, parts)) == [1, 2]
    assert exact_matrix(basis).det() != 0
    owner = {i: k for k, part in enumerate(parts) for i in part}
    for a in mixed:
        for i, row in enumerate(conjugated(a, basis)):
            assert all(not v for j, v in enumerate(row) if owner[i] != owner[j])


def test_single_block_with_apparent_pole() -> None:
    found = solve_single({"x": rational("(2+eps)/x-1/(x-eps)-3*eps/(x+1)")})
    assert isinstance(found, Block)
    assert found.transformation[0][0] in (rational("x^2/(x-eps)"), rational("x^2/(eps-x)"))
    assert found.residues == {"x = 0": ((1,),), "x = -1": ((-3,),)}


def operator_text(rows):
    found = picard_fuchs(rows, "x")
    return None if found is None else found.text()


def test_picard_fuchs_operator_is_read_off() -> None:
    """2(1-x) f' = f; and f'' = x f as a system."""
    assert operator_text(matrix([["1/2/(1-x)"]])) == "2*(x-1)*D + 1"
    # an overall 1/eps between the masters is scaled away first
    assert operator_text(matrix([["0", "1/eps"], ["eps*x", "0"]])) == "D^2 - x"
    assert picard_fuchs(matrix([["0", "1/eps"], ["1/eps", "0"]]), "x") is None


def test_blocks_follow_their_dependences() -> None:
    assert coupled_blocks([(2,), (), (0, 1), (1,)]) == ((1,), (0, 2), (3,))


def test_inverse_of_exact_matrices() -> None:
    system, _ = scrambled(Random(1), [2, 1], [0, 1])
    rows = system.matrices["x"]
    shifted = tuple(tuple(e + (i == j) for j, e in enumerate(row)) for i, row in enumerate(rows))
    assert product(shifted, inverse(shifted, RING), RING) == identity(RING, 3)
