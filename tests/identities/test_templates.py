"""Templates against derivatives taken component by component in explicit vectors modulo a prime."""

from __future__ import annotations

import random

import pytest
from family_maker import bubble, double_box, kite, make_family, massive_triangle, massless_box

from ibpred.errors import InputError
from ibpred.identities.derivatives import derivative_templates, momentum_operator
from ibpred.identities.templates import ibp_templates

P = 2**31 - 19  # 1 modulo 4: minus one is a square
assert P % 4 == 1
ROOT = next(pow(a, (P - 1) // 4, P) for a in range(2, 50) if pow(a, (P - 1) // 2, P) == P - 1)
SPACE = 8


def dot(a, b):
    return sum(x * y for x, y in zip(a, b, strict=True)) % P


def combine(vectors, coefficients):
    return [sum(c * v[m] for c, v in zip(coefficients, vectors, strict=True)) % P for m in range(SPACE)]


def of_square(value):
    """Two components whose squares sum to a value."""
    half = pow(2, -1, P)
    return [(value + 1) * half % P, (value - 1) * half * pow(ROOT, -1, P) % P]


def external_vectors(gram):
    """Vectors with a given Gram matrix modulo P (Cholesky with two components per square, and null pairs)."""
    vectors = []
    n = len(gram)
    # v_e = null_e + (G_ee / 2) dual_e + sum_(f<e) G_ef dual_f with null.dual = 1
    half = pow(2, -1, P)
    for e in range(n):
        vector = [0] * SPACE
        for f in range(n):
            null = [0] * SPACE
            null[2 * f], null[2 * f + 1] = 1, ROOT
            dual = [0] * SPACE
            dual[2 * f], dual[2 * f + 1] = half, -half * ROOT % P
            assert dot(null, null) == 0
            assert dot(dual, dual) == 0
            assert dot(null, dual) == 1
            if f == e:
                vector = combine([vector, null, dual], [1, 1, gram[e][e] * half % P])
            elif f < e:
                # v_f contains null_f, so a dual_f piece gives the product with it
                vector = combine([vector, dual], [1, gram[e][f]])
        vectors.append(vector)
    return vectors


def number(value, values):
    return value.modular([values[name] for name in value.ring.names], P)


def point(family, seed):
    """Random invariants (unit one), external and loop vectors."""
    rng = random.Random(seed)
    values = {i.name: rng.randrange(1, P) for i in family.invariants}
    values["d"] = SPACE
    if family.unit:
        values[family.unit] = 1
    gram = [[number(value, values) for value in row] for row in family.gram]
    external = external_vectors(gram)
    for e, row in enumerate(gram):
        for f, value in enumerate(row):
            assert dot(external[e], external[f]) == value
    loops = [[rng.randrange(P) for _ in range(SPACE)] for _ in family.loops]
    return values, external, loops


def line_values(family, values, momenta):
    found = []
    for line in family.lines:
        q = combine(momenta, [int(c) for c in line.momentum])
        found.append((number(line.mass2, values) - dot(q, q)) % P)
    return found


def apply_template(template, family, powers, values, lines):
    """Sum of the template's terms over the product of lines, at explicit vectors."""
    names = family.internal_ring.names
    total = 0
    for shift, forms in zip(template.shifts.tolist(), template.values.tolist(), strict=True):
        coefficient = 0
        for exponents, form in zip(template.monomials, forms, strict=True):
            monomial = 1
            for name, e in zip(names, exponents, strict=True):
                monomial = monomial * pow(values[name], e, P) % P
            coefficient += monomial * sum(c * a for c, a in zip(form, (*powers, 1), strict=True))
        factor = 1
        for s, d in zip(shift, lines, strict=True):
            factor = factor * pow(d, -s, P) % P
        total += coefficient * factor
    return total % P


FAMILIES = [bubble, massless_box, kite, double_box, massive_triangle]


def random_powers(family, rng):
    return [rng.randrange(-3, 1) if line.numerator else rng.randrange(-2, 4) for line in family.lines]


@pytest.mark.parametrize("make", FAMILIES)
def test_identities_are_divergences(make) -> None:
    family = make()
    rng = random.Random(5)
    templates = ibp_templates(family)
    loops = len(family.loops)
    assert len(templates) == loops * (loops + len(family.external))
    values, external, loop = point(family, 1)
    momenta = [*loop, *external]
    lines = line_values(family, values, momenta)
    at = 0
    for i in range(loops):
        for j in range(loops + len(family.external)):
            for _ in range(3):
                powers = random_powers(family, rng)
                expected = SPACE if i == j else 0
                for line, d, a in zip(family.lines, lines, powers, strict=True):
                    q = combine(momenta, [int(c) for c in line.momentum])
                    # dD/dk_i = -2 c_i q
                    slope = -2 * int(line.momentum[i]) * dot(q, momenta[j])
                    expected -= a * slope * pow(d, -1, P)
                assert apply_template(templates[at], family, powers, values, lines) == expected % P
            at += 1


@pytest.mark.parametrize("make", FAMILIES)
def test_derivatives_move_momenta_and_masses(make) -> None:
    family = make()
    rng = random.Random(7)
    values, external, loop = point(family, 2)
    momenta = [*loop, *external]
    lines = line_values(family, values, momenta)
    kinematic = {i.name: values[i.name] for i in family.invariants}
    for name, template in derivative_templates(family).items():
        beta = [[number(value, kinematic) for value in row] for row in momentum_operator(family, name)]
        moved = [combine(external, row) for row in beta]
        # the operator changes each product of external momenta as the kinematics says
        for e, row in enumerate(family.gram):
            for f, value in enumerate(row):
                change = (dot(moved[e], external[f]) + dot(external[e], moved[f])) % P
                assert change == number(value.derivative(name), kinematic)
        weight = 0
        for exponents, c in zip(template.monomials, template.weight.tolist(), strict=True):
            monomial = 1
            for symbol, e in zip(family.internal_ring.names, exponents, strict=True):
                monomial = monomial * pow(values[symbol], e, P) % P
            weight += c * monomial
        powers = random_powers(family, rng)
        expected = 0
        for line, d, a in zip(family.lines, lines, powers, strict=True):
            coefficients = [int(c) for c in line.momentum]
            q = combine(momenta, coefficients)
            dq = combine(moved, coefficients[len(loop) :]) if moved else [0] * SPACE
            change = number(line.mass2.derivative(name), kinematic) - 2 * dot(q, dq)
            expected -= a * change * pow(d, -1, P)
        found = apply_template(template, family, powers, values, lines)
        assert found == weight * expected % P


def test_singular_gram_matrix_still_varies() -> None:
    # the rank of G is constant in s, so some change of the momenta follows G along its orbit
    family = make_family(
        "collinear",
        ["k"],
        ["p1", "p2"],
        {"s": 2, "m2": 2},
        {("p1", "p1"): "s", ("p2", "p2"): "s", ("p1", "p2"): "s"},
        ["k", ("k+p1", "m2"), "k+p1+p2"],
    )
    beta = momentum_operator(family, "s")
    gram, legs = family.gram, range(2)
    for e in legs:
        for f in legs:
            change = sum(
                (beta[e][g] * gram[g][f] + gram[e][g] * beta[f][g] for g in legs), family.kinematic_ring.zero
            )
            assert change == gram[e][f].derivative("s")


def test_underdetermined_lines_are_refused() -> None:
    family = make_family("bad", ["k"], ["p"], {"s": 2}, {("p", "p"): "s"}, ["k", "-k"])
    with pytest.raises(InputError, match="do not determine"):
        ibp_templates(family)
