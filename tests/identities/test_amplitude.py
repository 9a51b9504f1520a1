"""Amplitudes as text: numbers in, numbers out, at random momenta."""

from __future__ import annotations

import random
from fractions import Fraction
from pathlib import Path

import pytest

from ibpred.errors import ExpressionError
from ibpred.family.reading import read_family
from ibpred.identities.amplitude import Setting, parse_terms

FAMILIES = Path(__file__).parents[2] / "families"


def family(name: str):
    file = FAMILIES / f"{name}.toml"
    return read_family(file.read_text(encoding="utf-8"), file.name, name)


VERTEX, CROSSED = family("planar-vertex"), family("crossed-vertex")
SETTING = Setting([VERTEX, CROSSED])
LOOPS, LEGS = VERTEX.loops, VERTEX.external
P = LEGS[0]


class Numbers:
    """Random values for all scalar products with a loop momentum, for d and the invariants."""

    def __init__(self, seed: int) -> None:
        source = random.Random(seed)
        self.values = {name: Fraction(source.randint(2, 50)) for name in SETTING.ring.names}
        self.products = {}
        for i, a in enumerate(LOOPS):
            for b in (*LOOPS[i:], *LEGS):
                self.products[a, b] = self.products[b, a] = Fraction(source.randint(-50, 50))
        for e, a in enumerate(LEGS):
            for f, b in enumerate(LEGS):
                self.products[a, b] = self.of(VERTEX.gram[e][f])

    def of(self, value) -> Fraction:
        known = [self.values[name] for name in value.ring.names]
        above, below = (
            sum(
                (Fraction(int(c)) * power_product(known, map(int, e)) for e, c in poly.to_dict().items()),
                Fraction(0),
            )
            for poly in (value.numerator, value.denominator)
        )
        return above / below

    def line(self, line) -> Fraction:
        total = self.of(line.constant)
        for i, a in enumerate(LOOPS):
            total += sum(line.quadratic[i][j] * self.products[a, b] for j, b in enumerate(LOOPS))
            total += sum(line.linear[i][e] * self.products[a, b] for e, b in enumerate(LEGS))
        return total

    def integrand(self, integral) -> Fraction:
        number, powers = integral
        lines = SETTING.families[number].lines
        return power_product([self.line(line) for line in lines], [-a for a in powers])

    def total(self, terms) -> Fraction:
        return sum(
            (self.of(value) * self.integrand(integral) for integral, value in terms.items()), Fraction(0)
        )


def power_product(values, powers) -> Fraction:
    result = Fraction(1)
    for value, power in zip(values, powers, strict=True):
        result *= value**power
    return result


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_the_integrand_is_kept(seed: int) -> None:
    """Numerators written in lines have the same value as the scalar products, at random momenta."""
    at = Numbers(seed)
    k, q, p = LOOPS[0], LOOPS[1], LEGS
    s = SETTING.ring.names[1]
    text = (
        f"(d-4)^2/{s}*({k}*{p[0]})^2*({q}*{p[1]}-3*{k}*{q})*planar-vertex(1,1,1,1,1,1,-1)"
        f" - 2/3*({k}+2*{q}-{p[0]})^4*crossed-vertex(1,0,2,1,1,1,0)/(d+{s})"
        f" + {p[0]}*{p[1]}*planar-vertex(1,1,1,1,0,0,0)*{k}*({q}-{p[1]})"
    )
    dot = at.products
    d, big = at.values["d"], at.values[s]
    square = dot[k, k] + 4 * dot[q, q] + dot[p[0], p[0]] + 4 * dot[k, q] - 2 * dot[k, p[0]] - 4 * dot[q, p[0]]
    expected = (
        (d - 4) ** 2
        / big
        * dot[k, p[0]] ** 2
        * (dot[q, p[1]] - 3 * dot[k, q])
        * at.integrand((0, (1, 1, 1, 1, 1, 1, -1)))
    )
    expected -= Fraction(2, 3) * square**2 / (d + big) * at.integrand((1, (1, 0, 2, 1, 1, 1, 0)))
    expected += dot[p[0], p[1]] * (dot[k, q] - dot[k, p[1]]) * at.integrand((0, (1, 1, 1, 1, 0, 0, 0)))
    assert at.total(parse_terms(text, SETTING)) == expected


def test_terms_that_cancel_are_gone() -> None:
    assert parse_terms("planar-vertex(1,1,1,0,0,0,0) - planar-vertex(1,1,1,0,0,0,0)", SETTING) == {}


@pytest.mark.parametrize(
    ("text", "problem", "place"),
    [
        ("2*planar-vertex(1,1)", "has 7 lines", 2),
        ("2*planar-vertx(1,1,1,1,1,1,0)", "did you mean 'planar-vertex'", 2),
        ("x*planar-vertex(1,1,1,1,1,1,0)", "unknown symbol 'x'", 0),
        ("planar-vertex(1,1,1,1,1,1,0) + d", "without an integral", 0),
        (f"{P}*planar-vertex(1,1,1,1,1,1,0)", "this is a vector", 0),
        (f"({P}+d)*planar-vertex(1,1,1,1,1,1,0)", "a vector and a scalar", 3),
        (f"{P}^3*planar-vertex(1,1,1,1,1,1,0)", "only even powers", 3),
        (f"1/{P}^2*planar-vertex(1,1,1,1,1,1,0)", "division by zero", 1),
        (f"1/{LOOPS[0]}^2*planar-vertex(1,1,1,1,1,1,0)", "division by momenta", 1),
        ("planar-vertex(1,1,1,1,1,1,0)^2", "two integrals", 29),
        ("d*(planar-vertex(1,1,1,1,1,1,0)", "')' expected", 31),
    ],
)
def test_refusals_point_at_the_place(text: str, problem: str, place: int) -> None:
    with pytest.raises(ExpressionError) as caught:
        parse_terms(text, SETTING)
    assert problem in caught.value.problem
    assert caught.value.text == text
    assert caught.value.position == place
