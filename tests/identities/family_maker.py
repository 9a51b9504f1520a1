"""Families made by hand from momenta, without the file reader."""

from __future__ import annotations

from fractions import Fraction

from ibpred.exact.grammar import parse, parse_rational
from ibpred.exact.rational import ring
from ibpred.family.definition import FamilyDefinition, Invariant, Line


class Vector(dict):
    def __add__(self, other):
        return Vector({k: self.get(k, 0) + other.get(k, 0) for k in self | other})

    def __sub__(self, other):
        return self + -other

    def __neg__(self):
        return Vector({k: -v for k, v in self.items()})


def make_family(name, loops, external, invariants, gram, lines, *, numerators=(), unit=None, dimension=4):
    """`gram`: {(e, f): text}; `lines`: momentum texts, or (momentum, mass2); `numerators`: the same."""
    kinematic = ring(tuple(invariants))
    products = [[kinematic.zero for _ in external] for _ in external]
    for (e, f), text in gram.items():
        value = parse_rational(text, kinematic)
        products[external.index(e)][external.index(f)] = value
        products[external.index(f)][external.index(e)] = value
    made = []
    for number, entry in enumerate([*lines, *numerators]):
        text, mass = entry if isinstance(entry, tuple) else (entry, "0")
        q = parse(text, lambda n: n, lambda symbol: Vector({symbol: Fraction(1)}))
        inner = [q.get(k, Fraction(0)) for k in loops]
        outer = [q.get(p, Fraction(0)) for p in external]
        mass2 = parse_rational(mass, kinematic)
        constant = mass2
        for e, x in enumerate(outer):
            for f, y in enumerate(outer):
                constant = constant - products[e][f] * (x * y)
        made.append(
            Line(
                text,
                (*inner, *outer),
                tuple(tuple(-x * y for y in inner) for x in inner),
                tuple(tuple(-2 * x * y for y in outer) for x in inner),
                constant,
                mass2,
                False,
                number >= len(lines),
            )
        )
    return FamilyDefinition(
        name,
        name,
        tuple(loops),
        tuple(external),
        tuple(Invariant(n, d) for n, d in invariants.items()),
        unit or next(iter(invariants), None),
        dimension,
        tuple(map(tuple, products)),
        tuple(made),
        None,
    )


FOUR_MASSLESS = {
    ("p1", "p2"): "s/2",
    ("p2", "p3"): "t/2",
    ("p1", "p3"): "(-s-t)/2",
}


def massless_box():
    return make_family(
        "box",
        ["k"],
        ["p1", "p2", "p3"],
        {"s": 2, "t": 2},
        FOUR_MASSLESS,
        ["k", "k+p1", "k+p1+p2", "k+p1+p2+p3"],
    )


def double_box():
    return make_family(
        "double-box",
        ["k1", "k2"],
        ["p1", "p2", "p3"],
        {"s": 2, "t": 2},
        FOUR_MASSLESS,
        ["k1", "k1+p1", "k1+p1+p2", "k1-k2", "k2", "k2+p1+p2", "k2+p1+p2+p3"],
        numerators=["k1+p1+p2+p3", "k2+p1"],
    )


def bubble():
    return make_family("bubble", ["k"], ["p"], {"s": 2}, {("p", "p"): "s"}, ["k", "k+p"])


def kite():
    return make_family(
        "kite", ["k1", "k2"], ["p"], {"s": 2}, {("p", "p"): "s"}, ["k1", "k2", "k1+p", "k2+p", "k1-k2"]
    )


def massive_triangle():
    """Generic kinematics: three invariants in the Gram matrix, a mass in two lines."""
    return make_family(
        "triangle",
        ["k"],
        ["p1", "p2"],
        {"s": 2, "u": 2, "w": 2, "m2": 2},
        {("p1", "p1"): "u", ("p2", "p2"): "w", ("p1", "p2"): "(s-u-w)/2"},
        [("k", "m2"), "k+p1", ("k+p1+p2", "m2+w")],
    )
