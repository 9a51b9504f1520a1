"""Massless integrals of one scale, at -s = 1: three-loop propagators and the two-loop vertices.

Conventions as in `closed_forms`. Integrals that are one-loop recursively are products of Gamma functions; for
the others the published Laurent coefficients stand here, each with its source, as coefficients of eps.
"""

from __future__ import annotations

from mpmath import euler, exp, gamma, mpc, mpf, pi, zeta

# -- recursively one-loop -----------------------------------------------------------------------------------


def chain_factor(eps: mpc, a: mpc, b: mpc) -> mpc:
    """One-loop massless propagator ``int 1/((k^2)^a ((k+p)^2)^b)`` at p^2 = 1 (Euclidean), bare."""
    h = 2 - eps
    return gamma(h - a) * gamma(h - b) * gamma(a + b - h) / (gamma(a) * gamma(b) * gamma(2 * h - a - b))


def light_like_factor(eps: mpc, a: mpc, b: mpc, c: mpc) -> mpc:
    """One-loop triangle, two light-like legs at the ends of line b, the massive leg between a and c; bare.

    ``F = x_a x_c`` alone, so that Feynman's parameters give, with h = d/2,
    ``Gamma(h-a-b) Gamma(h-b-c) Gamma(a+b+c-h)/(Gamma(a) Gamma(c) Gamma(2h-a-b-c))``.
    """
    h = 2 - eps
    above = gamma(h - a - b) * gamma(h - b - c) * gamma(a + b + c - h)
    return above / (gamma(a) * gamma(c) * gamma(2 * h - a - b - c))


def normalised(eps: mpc, loops: int) -> mpc:
    return exp(loops * eps * euler)


def three_loop_sunrise(eps: mpc) -> mpc:
    """Four lines between two points."""
    G = chain_factor
    return normalised(eps, 3) * G(eps, 1, 1) * G(eps, 1, eps) * G(eps, 1, 2 * eps - 1)


def bubble_times_sunrise(eps: mpc) -> mpc:
    """A bubble and a two-loop sunrise in a chain."""
    G = chain_factor
    return normalised(eps, 3) * G(eps, 1, 1) ** 2 * G(eps, 1, eps)


def three_bubbles(eps: mpc) -> mpc:
    """Three bubbles in a chain."""
    return normalised(eps, 3) * chain_factor(eps, 1, 1) ** 3


def two_bubbles_in_a_loop(eps: mpc) -> mpc:
    """A chain of two bubbles, and one line across: powers 2 eps and 1."""
    G = chain_factor
    return normalised(eps, 3) * G(eps, 1, 1) ** 2 * G(eps, 1, 2 * eps)


def triangle_with_bubble(eps: mpc) -> mpc:
    """Two-loop vertex of four lines: a triangle whose line between the light-like legs is a bubble."""
    return normalised(eps, 2) * chain_factor(eps, 1, 1) * light_like_factor(eps, 1, eps, 1)


def vertex_sunrise(eps: mpc) -> mpc:
    """Three lines through which the momentum of the massive leg flows."""
    return normalised(eps, 2) * chain_factor(eps, 1, 1) * chain_factor(eps, 1, eps)


# -- published coefficients ---------------------------------------------------------------------------------


def finite_three_loop_propagators() -> dict[int, mpf]:
    """Planar ladder and non-planar graph with eight lines, at eps = 0: both are 20 zeta(5).

    Chetyrkin, Kataev, Tkachov, Nucl. Phys. B174 (1980) 345; Chetyrkin, Tkachov, Nucl. Phys. B192 (1981) 159.
    (The benz graph with eight lines is not finite: its soft region gives ``-2 zeta(3)/eps``.)
    The ladders are ``binomial(2L, L) zeta(2L-1)`` at L loops (Belokurov, Usyukina, J. Phys. A16 (1983) 2811).
    """
    return {0: 20 * zeta(5)}


def kite_with_a_bubble() -> dict[int, mpf]:
    """The kite whose middle line is a bubble: six lines at three loops.

    Baikov, Chetyrkin, arXiv:1004.1153. The rational numbers are from memory; zeta(2) comes from
    the measure, ``-zeta(2)/2 (1/eps + 7)`` altogether; ``7 zeta(3)/3`` was read off the
    chain's digits. So only direct integration, four digits, checks zeta(3) independently.
    """
    z2, z3 = zeta(2), zeta(3)
    return {
        -3: mpf(1) / 3,
        -2: mpf(7) / 3,
        -1: mpf(31) / 3 - z2 / 2,
        0: mpf(103) / 3 - 7 * z2 / 2 + 7 * z3 / 3,
    }


def crossed_vertex() -> dict[int, mpf]:
    """The crossed two-loop vertex, six lines.

    Gonsalves, Phys. Rev. D28 (1983) 1542; Kramer, Lampe, J. Math. Phys. 28 (1987) 945; Gehrmann, Huber,
    Maitre, hep-ph/0507061: ``1/eps^4 - 5 pi^2/(6 eps^2) - 27 zeta(3)/eps - 23 pi^4/36`` (from memory) times
    ``exp(2 eps gamma_E)/Gamma(1-eps)^2 = 1 - zeta(2) eps^2 - 2 zeta(3) eps^3/3
    + (zeta(2)^2 - zeta(4)) eps^4/2``.
    """
    z2, z3, z4 = zeta(2), zeta(3), zeta(4)
    bare = {-4: mpf(1), -3: mpf(0), -2: -5 * pi**2 / 6, -1: -27 * z3, 0: -23 * pi**4 / 36}
    factor = {0: mpf(1), 1: mpf(0), 2: -z2, 3: -2 * z3 / 3, 4: (z2**2 - z4) / 2}
    found = {order: mpf(0) for order in bare}
    for order, value in bare.items():
        for extra, coefficient in factor.items():
            if order + extra <= 0:
                found[order + extra] += value * coefficient
    return found
