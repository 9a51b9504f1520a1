"""Families for the tests of sectors, built by hand from momenta."""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from fractions import Fraction

from ibpred.exact.grammar import parse_rational
from ibpred.exact.rational import ring
from ibpred.family.definition import FamilyDefinition, Invariant, Line


def vector(text: str, names: Sequence[str]) -> tuple[Fraction, ...]:
    """Coefficients of a sum such as ``k1-k2+2*p1``."""
    found = dict.fromkeys(names, Fraction(0))
    for sign, number, name in re.findall(r"([+-]?)(?:(\d+(?:/\d+)?)\*)?([A-Za-z]\w*)", text):
        found[name] += Fraction(f"{sign}{number or 1}")
    return tuple(found[name] for name in names)


def make_family(
    name: str,
    loops: str,
    external: str,
    invariants: str,
    products: Mapping[str, str],
    lines: Sequence[str],
) -> FamilyDefinition:
    """A family from short texts.

    `products` holds ``"p1 p2": "s/2"``, zero where missing; a line is ``"MOMENTUM | mass2 | flags"``,
    or ``"A . B | constant | flags"`` for the expression ``2 A.B + constant`` with A, B sums of momenta.
    """
    ks, ps, vs = loops.split(), external.split(), invariants.split()
    kinematic = ring(vs)
    gram = tuple(
        tuple(parse_rational(products.get(f"{a} {b}", products.get(f"{b} {a}", "0")), kinematic) for b in ps)
        for a in ps
    )
    made = []
    for text in lines:
        form, constant_text, flags = (*(part.strip() for part in text.split("|")), "", "")[:3]
        shift = parse_rational(constant_text or "0", kinematic)
        if "." in form:
            a, b = (vector(part, ks + ps) for part in form.split("."))
            factor, momentum = Fraction(1), None
        else:
            a = b = momentum = vector(form, ks + ps)
            factor = Fraction(-1, 2)
        n = len(ks)
        quadratic = tuple(tuple(factor * (a[i] * b[j] + a[j] * b[i]) for j in range(n)) for i in range(n))
        linear = tuple(
            tuple(2 * factor * (a[i] * b[n + e] + a[n + e] * b[i]) for e in range(len(ps))) for i in range(n)
        )
        constant = shift
        for e in range(len(ps)):
            for f in range(len(ps)):
                constant = constant + gram[e][f] * (2 * factor * a[n + e] * b[n + f])
        made.append(
            Line(
                text=form,
                momentum=momentum,
                quadratic=quadratic,
                linear=linear,
                constant=constant,
                mass2=shift if momentum else kinematic.zero,
                cut="cut" in flags,
                numerator="numerator" in flags,
            )
        )
    return FamilyDefinition(
        name=name,
        title=name,
        loops=tuple(ks),
        external=tuple(ps),
        invariants=tuple(Invariant(v, 2) for v in vs),
        unit=vs[0] if vs else None,
        dimension=4,
        gram=gram,
        lines=tuple(made),
        graph=None,
    )


FOUR_LEGS = {"p1 p2": "s/2", "p2 p3": "t/2", "p1 p3": "(-s-t)/2"}
THREE_LEGS = {"p1 p2": "s/2"}


def bubble(first: str = "0", second: str = "0") -> FamilyDefinition:
    return make_family("bubble", "k", "p", "s m2 M2", {"p p": "s"}, [f"k|{first}", f"k+p|{second}"])


def box(mass2: str = "0") -> FamilyDefinition:
    lines = [f"{q}|{mass2}" for q in ("k", "k+p1", "k+p1+p2", "k+p1+p2+p3")]
    return make_family("box", "k", "p1 p2 p3", "s t m2", FOUR_LEGS, lines)


def sunrise(mass2: str = "0") -> FamilyDefinition:
    lines = [f"k1|{mass2}", f"k2|{mass2}", f"k1+k2+p|{mass2}", "k1+p||numerator", "k2+p||numerator"]
    return make_family("sunrise", "k1 k2", "p", "s m2", {"p p": "s"}, lines)


def kite() -> FamilyDefinition:
    return make_family("kite", "k1 k2", "p", "s", {"p p": "s"}, ["k1", "k2", "k1-k2", "k1+p", "k2+p"])


def double_box(mass2: str = "0") -> FamilyDefinition:
    momenta = ["k1", "k1+p1", "k1+p1+p2", "k1-k2", "k2", "k2+p1+p2", "k2+p1+p2+p3"]
    lines = [*(f"{q}|{mass2}" for q in momenta), "k1+p1+p2+p3||numerator", "k2+p1||numerator"]
    return make_family("double_box", "k1 k2", "p1 p2 p3", "s t m2", FOUR_LEGS, lines)


def crossed_vertex() -> FamilyDefinition:
    lines = ["k1", "k2", "k1+p1", "k2-p2", "k1-k2", "k1-k2+p1+p2", "k1+p2||numerator"]
    return make_family("crossed_vertex", "k1 k2", "p1 p2", "s", THREE_LEGS, lines)


def heavy_self_energy() -> FamilyDefinition:
    """Two loops, heavy lines linear in the velocity v with residual energy w: ``-2 k.v - w``."""
    lines = ["k1", "k2", "k1-k2", "-k1 . v|-w", "-k2 . v|-w"]
    return make_family("heavy", "k1 k2", "v", "w", {"v v": "1"}, lines)
