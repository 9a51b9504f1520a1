"""Letters that are not linear in the variable of the elimination, over triangular and rooted systems."""

from __future__ import annotations

from fractions import Fraction
from random import Random

import pytest

from ibpred.epsform.factorise import factorise
from ibpred.epsform.form import Connection, EpsilonForm, Matrix
from ibpred.epsform.matrices import added, derivative, inverse, lifted, product, scaled, subtracted
from ibpred.epsform.verify import is_integrable, verify
from ibpred.exact.grammar import parse_rational
from ibpred.exact.primes import first_primes
from ibpred.exact.rational import Rational, ring

PRIMES = first_primes(20)
FIELD = ring(("eps", "x", "y"))
LETTERS = ("x^2+y^2", "x^3+x*y^2+y+1", "x*y+2", "y^2+y+1")


def element(text: str) -> Rational:
    return parse_rational(text, FIELD)


def commuting(random: Random, size: int) -> list[tuple[tuple[Fraction, ...], ...]]:
    """Polynomials in one lower triangular matrix, so that any combination of dlogs is integrable."""
    base = [
        [Fraction(random.randint(-2, 2)) if j <= i else Fraction(0) for j in range(size)] for i in range(size)
    ]
    power = [[Fraction(int(i == j)) for j in range(size)] for i in range(size)]
    found = []
    for _ in LETTERS:
        power = [
            [sum((power[i][k] * base[k][j] for k in range(size)), Fraction(0)) for j in range(size)]
            for i in range(size)
        ]
        found.append(tuple(map(tuple, power)))
    return found


def system(residues, root: Rational | None, odd: tuple[int, ...], change: Matrix) -> Connection:
    """The canonical system in another basis, sqrt(root) split off the functions in `odd`."""
    size = len(change)
    matrices = {}
    for name in ("x", "y"):
        total: Matrix = tuple((FIELD.zero,) * size for _ in range(size))
        for text, constants in zip(LETTERS, residues, strict=True):
            letter = element(text)
            log = letter.derivative(name) / letter * FIELD.variable("eps")
            total = added(total, scaled(lifted(FIELD, constants), log))
        if root is not None:
            half = root.derivative(name) / root / 2
            shift = tuple(
                tuple(half if i == j and i in odd else FIELD.zero for j in range(size)) for i in range(size)
            )
            total = subtracted(total, shift)
        whole = added(product(change, total, FIELD), derivative(change, name))
        matrices[name] = product(whole, inverse(change, FIELD), FIELD)
    return Connection(("x", "y"), FIELD, matrices, (1,) * size, tuple(f"I{i + 1}" for i in range(size)))


def admixtures(random: Random, size: int, density: float) -> Matrix:
    """Unipotent, with poles of order up to two at the letters and growth at infinity."""
    parts = ["1", "eps", "x", "y^2", "x*y-eps"]
    below = ["1", *LETTERS, "(x^2+y^2)^2", "(x*y+2)*(x^2+y^2)"]
    rows = []
    for i in range(size):
        row = []
        for j in range(size):
            entry = FIELD.one if i == j else FIELD.zero
            if j < i and random.random() < density:
                entry = element(random.choice(parts)) / element(random.choice(below))
            row.append(entry)
        rows.append(tuple(row))
    return tuple(rows)


@pytest.mark.parametrize("seed", range(4))
def test_triangular_systems_with_nonlinear_letters(seed: int) -> None:
    random = Random(seed)
    made = system(commuting(random, 4), None, (), admixtures(random, 4, 0.6))
    form = factorise(made, PRIMES, 1)
    assert isinstance(form, EpsilonForm), form.obstructions
    assert verify(made, form)
    assert is_integrable(form)
    assert {str(letter) for letter in form.letters} <= {str(element(text)) for text in LETTERS}


@pytest.mark.parametrize("seed", range(3))
def test_a_nonlinear_root_beside_nonlinear_letters(seed: int) -> None:
    """Functions with the root of a cubic couple to each other only; the others to all with no root."""
    random = Random(seed)
    first, second = commuting(random, 2), commuting(random, 2)
    zero = Fraction(0)

    def both(a, b, i: int, j: int) -> Fraction:
        if i % 2 != j % 2:
            return zero
        return (b if i % 2 else a)[i // 2][j // 2]

    residues = [
        tuple(tuple(both(a, b, i, j) for j in range(4)) for i in range(4))
        for a, b in zip(first, second, strict=True)
    ]
    root = element("x^3+x*y^2+y+1")
    made = system(residues, root, (1, 3), admixtures(random, 4, 0.5))
    form = factorise(made, PRIMES, 1)
    assert isinstance(form, EpsilonForm), form.obstructions
    assert verify(made, form)
    assert sorted(form.tags) == [(), (), (0,), (0,)]
