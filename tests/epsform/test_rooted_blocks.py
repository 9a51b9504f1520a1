"""Coupled blocks whose functions carry different square roots, made from systems that are known."""

from __future__ import annotations

from fractions import Fraction
from random import Random

import pytest
from synthetic_systems import RING, connection, gauged, random_entry, unit

from ibpred.epsform.factorise import factorise
from ibpred.epsform.form import Connection, EpsilonForm, OddLetter
from ibpred.epsform.matrices import added, derivative, inverse, product
from ibpred.epsform.verify import is_integrable, rational_system, verify
from ibpred.exact.grammar import parse_rational
from ibpred.exact.primes import first_primes
from ibpred.exact.rational import ring

PRIMES = first_primes(30)

# for each root an odd letter: P with P^2 - Q a product of letters
ROOTS = {
    "two rational branch points": (["x", "x+4"], ["x", "x+2"]),
    "an irreducible quadratic": (["x^2+x+1"], ["x+1", "x-1"]),
    "a curve of genus one": (["x", "x+1", "x+2", "x+3"], ["x^2+3*x+1"]),
    "a branch point at infinity": (["1-x"], ["1", "x-1"]),
    "negative at the corner": (["x-1"], ["1"]),
}


def made(radicands, polynomials, tags, letters, numbers, field, variables) -> EpsilonForm:
    """A record that stands for a canonical system with roots; only its equation is used."""
    size = len(tags)
    one = tuple(tuple(field.one if i == j else field.zero for j in range(size)) for i in range(size))
    odd = tuple(OddLetter(p, roots) for p, roots in polynomials)
    even_matrices = tuple(tuple(map(tuple, numbers())) for _ in letters)
    even = tuple(
        tuple(
            tuple(v if tags[i] == tags[j] else Fraction(0) for j, v in enumerate(row))
            for i, row in enumerate(m)
        )
        for m in even_matrices
    )
    odd_matrices = tuple(
        tuple(
            tuple(
                v if set(tags[i]) ^ set(tags[j]) == set(letter.roots) else Fraction(0)
                for j, v in enumerate(row)
            )
            for i, row in enumerate(map(tuple, numbers()))
        )
        for letter in odd
    )
    return EpsilonForm(
        variables, field, tuple(letters), even, one, one, tags, tuple(radicands), odd, odd_matrices
    )


def numbers_of(random: Random, size: int, owner: list[int]):
    def draw():
        return [
            [Fraction(random.randint(-2, 2)) if owner[j] <= owner[i] else Fraction(0) for j in range(size)]
            for i in range(size)
        ]

    return draw


SOME = ("an irreducible quadratic", "a branch point at infinity", "negative at the corner")
CASES = [
    *((kind, [1, 2, 1], [1, 3], ()) for kind in SOME),
    ("a curve of genus one", [2], [1], ()),
    *((kind, [3], [2], pytest.mark.slow) for kind in ROOTS),
    *((kind, [2, 2], [1, 2], pytest.mark.slow) for kind in ROOTS),
]


@pytest.mark.parametrize(
    ("kind", "sizes", "odd"),
    [pytest.param(kind, sizes, odd, marks=marks) for kind, sizes, odd, marks in CASES],
)
def test_roots_in_one_ratio(kind: str, sizes: list[int], odd: list[int]) -> None:
    names, polynomials = ROOTS[kind]
    random = Random(f"{kind}{sizes}")
    size = sum(sizes)
    owner = [k for k, count in enumerate(sizes) for _ in range(count)]
    radicands = [parse_rational(text, RING) for text in names]
    everything = tuple(range(len(radicands)))
    tags = tuple(everything if i in odd else () for i in range(size))
    letters = [
        parse_rational(text, RING) for text in ("x", "x-2", *(t for t in names if t not in ("x", "1-x")))
    ]
    odd_letters = [(parse_rational(text, RING), everything) for text in polynomials]
    form = made(radicands, odd_letters, tags, letters, numbers_of(random, size, owner), RING, ("x",))
    system = rational_system(form, "x")
    assert system is not None
    change = [list(row) for row in unit(size)]
    for i in range(size):
        for j in range(size):
            if i != j and owner[j] <= owner[i] and random.random() < 0.5:
                change[i][j] = random_entry(random, [0, 2])
    whole = connection(gauged(system, tuple(map(tuple, change))), tuple(sizes))
    found = factorise(whole, PRIMES, 1)
    assert isinstance(found, EpsilonForm), found.obstructions
    assert verify(whole, found)
    assert is_integrable(found)
    assert sorted(map(len, found.tags)) == sorted(map(len, tags))


def test_a_root_of_two_ratios_in_a_coupled_block() -> None:
    """The bubble with two masses and its tadpoles, in a basis that couples all three."""
    field = ring(("eps", "x", "y"))

    def element(text: str):
        return parse_rational(text, field)

    def numbers(entries: dict[tuple[int, int], Fraction]):
        return tuple(tuple(entries.get((i, j), Fraction(0)) for j in range(3)) for i in range(3))

    one = tuple(tuple(field.one if i == j else field.zero for j in range(3)) for i in range(3))
    minus, half = Fraction(-1), Fraction(1, 2)
    form = EpsilonForm(
        ("x", "y"),
        field,
        (element("x"), element("y"), element("x^2-2*x*y+y^2+2*x+2*y+1")),
        (numbers({(0, 0): minus}), numbers({(1, 1): minus}), numbers({(2, 2): minus})),
        one,
        one,
        ((), (), (0,)),
        (element("x^2-2*x*y+y^2+2*x+2*y+1"),),
        (OddLetter(element("1+x+y"), (0,)), OddLetter(element("1+x-y"), (0,))),
        (numbers({(2, 0): -half}), numbers({(2, 0): half, (2, 1): -half})),
    )
    change = tuple(
        tuple(map(element, row)) for row in (["1", "y", "eps"], ["0", "1", "1/x"], ["x", "0", "1"])
    )
    matrices = {}
    for name in ("x", "y"):
        system = rational_system(form, name)
        assert system is not None
        whole = added(product(change, system, field), derivative(change, name))
        matrices[name] = product(whole, inverse(change, field), field)
    coupled = Connection(("x", "y"), field, matrices, (3,), ("a", "b", "c"))
    found = factorise(coupled, PRIMES, 1)
    assert isinstance(found, EpsilonForm), found.obstructions
    assert verify(coupled, found)
    assert is_integrable(found)
    assert found.radicands == form.radicands
    assert sorted(found.tags) == [(), (), (0,)]
