"""Letters with square roots: their limits at corners, and the words made of them."""

from fractions import Fraction

import pytest
from mpmath import mp, mpf

from ibpred.epsform.form import EpsilonForm, OddLetter
from ibpred.exact.rational import ring
from ibpred.iterated.alphabet import RootLetter, alphabet_of, exact_root, limit, usual_corner
from ibpred.iterated.solution import fibration, named_letters, product_text

FIELD = ring(("eps", "x", "y"))
X, Y = FIELD.variable("x"), FIELD.variable("y")
KALLEN = (1 - X - Y) ** 2 - 4 * X * Y


def form_with(radicands, odd):
    """Two functions, the second coupled to the first by odd letters (P, roots) with the matrices 1, 2, ..."""
    one = ((FIELD.one, FIELD.zero), (FIELD.zero, FIELD.one))
    matrices = tuple(((Fraction(0), Fraction(0)), (Fraction(k), Fraction(0))) for k in range(1, len(odd) + 1))
    letters = tuple(OddLetter(p, roots) for p, roots in odd)
    tags = ((), tuple(range(len(radicands))))
    return EpsilonForm(("x", "y"), FIELD, (), (), one, one, tags, radicands, letters, matrices)


def value(letter, x, y):
    """A letter at a point near the corner, where its root is positive."""

    def number(rational):
        at = rational.substitute({"x": x, "y": y, "eps": 0}).to_fraction()
        return mpf(at.numerator) / at.denominator

    if not isinstance(letter, RootLetter):
        return number(letter)
    p, r = number(letter.polynomial), mp.sqrt(number(letter.square))
    return (p - r) / (p + r)


CASES = [
    ((KALLEN,), (1 - X - Y, (0,))),
    ((KALLEN,), (1 - X + Y, (0,))),
    ((KALLEN,), (X + Y - 1, (0,))),
    ((X, X + 4), (X, (0, 1))),
    ((Y, X + 4, X * Y + 4 * X + 4 * Y), (4 * Y + X * Y, (0, 1, 2))),
    ((X, Y + 4, X * Y + 4 * X + 4 * Y), (4 * X + X * Y, (0, 1, 2))),
    ((X * X + Y,), (X, (0,))),
    ((4 * X * X + 3 * Y,), (Y - 2 * X, (0,))),
]


@pytest.mark.parametrize("corner", [("x", "y"), ("y", "x")])
@pytest.mark.parametrize(("radicands", "odd"), CASES)
def test_limit_of_a_letter_with_a_root(radicands, odd, corner):
    # the logarithm of the letter between two points, both with the first ratio almost zero
    small, large = corner
    alphabet = alphabet_of(form_with(radicands, [odd]), corner)
    residue, rest = limit(alphabet, small, (large,))
    (letter,) = alphabet.odd
    size = 0 if residue is None else int(residue[1, 0].p)
    with mp.workdps(300):
        first = {small: Fraction(1, 10**100), large: Fraction(1, 10**10)}
        second = {small: Fraction(7, 10**100), large: Fraction(3, 10**10)}
        change = mp.log(abs(value(letter, **second) / value(letter, **first)))
        expected = size * mp.log(7)
        for other, matrix in {**rest.even, **rest.odd}.items():
            factor = Fraction(int(matrix[1, 0].p), int(matrix[1, 0].q))
            quotient = value(other, **second) / value(other, **first)
            expected += mpf(factor.numerator) / factor.denominator * mp.log(abs(quotient))
        assert abs(change - expected) < mpf(10) ** -35


def test_kernel_is_the_logarithmic_derivative():
    for radicands, odd in CASES:
        (letter,) = alphabet_of(form_with(radicands, [odd]), ("x", "y")).odd
        with mp.workdps(40):
            x, y, h = Fraction(1, 1000), Fraction(1, 30), Fraction(1, 10**12)
            change = mp.log(value(letter, x + h, y) / value(letter, x - h, y)) * 10**12 / 2
            at = {"x": x, "y": y, "eps": 0}
            kernel = letter.kernel("x").substitute(at).to_fraction()
            square = letter.square.substitute(at).to_fraction()
            expected = (
                mp.sqrt(mpf(square.numerator) / square.denominator) * kernel.numerator / kernel.denominator
            )
            assert abs(change - expected) < 1e-8 * abs(expected)


def test_equal_letters_are_found_and_perfect_squares_are_no_roots():
    # at y -> 0 the root of (1-x-y)^2 - 4xy is 1-x, and both letters are even
    form = form_with((KALLEN,), [(1 - X - Y, (0,)), (2 - 2 * X - 2 * Y, (0,))])
    alphabet = limit(alphabet_of(form, ("y", "x")), "y", ("x",))[1]
    assert not alphabet.odd
    # common factors of P and the root go out, with the sign that keeps the root positive at the corner
    form = form_with(((X - 1) ** 2 * (X + 4) * X,), [((X - 1) * X, (0,))])
    (letter,) = alphabet_of(form, ("x", "y")).odd
    assert (letter.polynomial, letter.square, letter.factor) == (-X, X * (X + 4), 1 - X)


def test_exact_roots():
    assert exact_root(4 * X**2 / (Y - 1) ** 4) in (2 * X / (Y - 1) ** 2, -2 * X / (Y - 1) ** 2)
    assert exact_root(2 * X**2) is None
    assert exact_root(X) is None


def test_corners_at_which_roots_are_real_come_first():
    form = form_with((X - Y,), [(X + Y, (0,))])
    assert usual_corner(form) == ("y", "x")
    assert usual_corner(form_with((Y - X,), [(X + Y, (0,))])) == ("x", "y")
    assert usual_corner(form_with((-X - Y,), [(X + Y, (0,))])) == ("y", "x")


def test_words_name_what_is_not_linear():
    form = form_with((KALLEN,), [(1 - X - Y, (0,)), (1 - X + Y, (0,))])
    levels = [level for level, _ in fibration(form, ("y", "x"))]
    names = named_letters(levels)
    assert list(names.values()) == ["l1", "l2"]
    assert product_text(((0, 1), ()), levels) == "I(l1,l2;y)"
