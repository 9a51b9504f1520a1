"""Closed forms of simple integrals, in mpmath and independent of the package.

Conventions: d = 4 - 2 eps, lines D = m2 - q^2, measure exp(L eps gamma_E) prod d^d k/(i pi^(d/2)), so every
integral is positive in the Euclidean region. Invariants enter as ``ms = -s`` etc.; a positive s is given by
its phase: ``log_ms = log(s) - i pi``. Each function takes eps first and works for complex eps, so Laurent
coefficients come from values on a small circle.
"""

from __future__ import annotations

from collections.abc import Callable

from mpmath import cos, euler, exp, expjpi, gamma, hyp2f1, log, mp, mpc, mpf, pi, polylog, sin, zeta

Function = Callable[[mpc], mpc]


def laurent_coefficients(function: Function, lowest: int, highest: int, digits: int) -> dict[int, mpc]:
    """Laurent coefficients at eps = 0 by the trapezoidal rule on a circle.

    With radius r = 1/8 and n points the error at order k is about ``(r/R)^n`` relative, R >= 1/2 the
    distance to the next singularity in eps.
    """
    radius = mpf(1) / 8
    count = highest - lowest + 8 + int(digits * 1.8)
    with mp.workdps(2 * digits + 15):
        samples = []
        for j in range(count):
            eps = radius * expjpi(mpf(2 * j + 1) / count)
            samples.append((eps, function(eps) * eps**-lowest))
        found = {}
        for k in range(highest - lowest + 1):
            found[lowest + k] = sum(value * eps**-k for eps, value in samples) / count
    return {k: +value for k, value in found.items()}


# -- massless propagators ---------------------------------------------------------------------------


def massless_bubble_factor(eps: mpc, a: mpc, b: mpc) -> mpc:
    """``G(a, b)``: one-loop massless propagator with powers a, b at -p^2 = 1, without exp(eps gamma_E)."""
    h = 2 - eps
    return gamma(h - a) * gamma(h - b) * gamma(a + b - h) / (gamma(a) * gamma(b) * gamma(2 * h - a - b))


def bubble(eps: mpc, log_ms: mpc) -> mpc:
    """Massless one-loop propagator with unit powers."""
    return exp(eps * euler) * massless_bubble_factor(eps, 1, 1) * exp(-eps * log_ms)


def sunrise(eps: mpc, log_ms: mpc) -> mpc:
    """Massless two-loop propagator with three lines: the bubble is a line of power eps."""
    factor = massless_bubble_factor(eps, 1, 1) * massless_bubble_factor(eps, 1, eps)
    return exp(2 * eps * euler) * factor * exp((1 - 2 * eps) * log_ms)


def glasses(eps: mpc, log_ms: mpc) -> mpc:
    """Product of two massless bubbles with the same momentum."""
    return bubble(eps, log_ms) ** 2


def kite(eps: mpc, log_ms: mpc) -> mpc:
    """Massless two-loop propagator with five lines (Chetyrkin, Tkachov, Nucl. Phys. B192 (1981) 159).

    The triangle rule gives ``(d - 4) K = 2 (glasses with one dot - nested bubble with one dot)``.
    """
    h = 2 - eps
    inner = massless_bubble_factor(eps, 1, 1)
    dotted_glasses = inner * massless_bubble_factor(eps, 2, 1)
    nested = inner * massless_bubble_factor(eps, 2, 3 - h)
    value = 2 * (dotted_glasses - nested) / (2 * h - 4)
    return exp(2 * eps * euler) * value * exp((-1 - 2 * eps) * log_ms)


# -- one massive scale --------------------------------------------------------------------------------


def tadpole(eps: mpc, m2: mpf) -> mpc:
    """One massive line."""
    return exp(eps * euler) * gamma(eps - 1) * m2 ** (1 - eps)


def one_mass_bubble(eps: mpc, s: mpf, m2: mpf) -> mpc:
    """One massive and one massless line, s < m2: ``int dy (1-y)^-eps (1 - y s/m2)^-eps``."""
    value = gamma(eps) / (1 - eps) * hyp2f1(1, eps, 2 - eps, s / m2)
    return exp(eps * euler) * value * m2**-eps


def equal_mass_bubble(eps: mpc, s: mpf, m2: mpf) -> mpc:
    """Two lines of equal mass, s < 4 m2: ``int dy (1 - y(1-y) s/m2)^-eps``."""
    value = gamma(eps) * hyp2f1(1, eps, mpf(3) / 2, s / (4 * m2))
    return exp(eps * euler) * value * m2**-eps


# -- triangles and the box ------------------------------------------------------------------------------


def one_loop_factor(eps: mpc) -> mpc:
    """``exp(eps gamma_E) Gamma(1+eps) Gamma(1-eps)^2 / Gamma(1-2 eps)``."""
    return exp(eps * euler) * gamma(1 + eps) * gamma(1 - eps) ** 2 / gamma(1 - 2 * eps)


def one_leg_triangle(eps: mpc, log_ms: mpc) -> mpc:
    """Massless triangle with one off-shell leg."""
    return one_loop_factor(eps) / eps**2 * exp((-1 - eps) * log_ms)


def two_leg_triangle(eps: mpc, log_ms: mpc, log_mt: mpc) -> mpc:
    """Massless triangle with two off-shell legs (Bern, Dixon, Kosower, hep-ph/9306240)."""
    difference = exp(-eps * log_ms) - exp(-eps * log_mt)
    return one_loop_factor(eps) / eps**2 * difference / (exp(log_ms) - exp(log_mt))


def box_bracket_euclidean(eps: mpc, x: mpf) -> mpc:
    """``eps^2 s t (-s)^eps Box / one_loop_factor`` for x = t/s > 0.

    From ``2 (x^-eps F(1+x) + F(1+1/x))``, F(z) = 2F1(1, -eps; 1-eps; z) (Bern, Dixon, Kosower,
    hep-ph/9306240), z inverted so that nothing lies on a cut; the phases add up to a cosine.
    """

    def rest(w: mpf) -> mpc:
        return -eps / (1 + eps) * w * hyp2f1(1, 1 + eps, 2 + eps, w)

    cut = 2 * pi * eps * cos(pi * eps) / sin(pi * eps) * ((1 + x) / x) ** eps
    return 2 * (cut + x**-eps * rest(1 / (1 + x)) + rest(x / (1 + x)))


def box_bracket_continued(eps: mpc, x: mpf, half_turns: int) -> mpc:
    """The same for -1 < x < 0 reached from above (+1) or below (-1) through complex x."""

    def F(z: mpf) -> mpc:
        return hyp2f1(1, -eps, 1 - eps, z)

    power = exp(-eps * (log(-x) + half_turns * 1j * pi))
    return 2 * (power * F(1 + x) + F(1 + 1 / x))


def box(eps: mpc, s: mpf, t: mpf) -> mpc:
    """Massless box for s, t < 0, or for s > 0 > t > -s (s + i0)."""
    if s < 0 and t < 0:
        return (
            one_loop_factor(eps) / (eps**2 * s * t) * exp(-eps * log(-s)) * box_bracket_euclidean(eps, t / s)
        )
    if not (s > 0 and -s < t < 0):
        raise ValueError("only the Euclidean and the s-channel region are written down here")
    # x = t/s = (-t)/(-s - i0) has the phase +pi
    prefactor = one_loop_factor(eps) / (eps**2 * s * t) * exp(-eps * (log(s) - 1j * pi))
    return prefactor * box_bracket_continued(eps, t / s, 1)


# -- planar double box -----------------------------------------------------------------------------------


def double_box_poles(x: mpf) -> dict[int, mpf]:
    """``(-s)^(2 + 2 eps) (-t)`` times the planar double box, x = t/s > 0: eps^-4 to eps^-1.

    Smirnov, hep-ph/9905323, brought to these conventions (seven lines: one sign). Written down from memory
    before the chain's values were known, which use none of it, but for the factor of the last bracket.
    """
    L = log(x)
    bracket = 2 * polylog(3, -x) - 2 * L * polylog(2, -x) - (L**2 + pi**2) * log(1 + x)
    return {
        -4: mpf(4),
        -3: -5 * L,
        -2: 2 * L**2 - 5 * pi**2 / 2,
        -1: 2 * L**3 / 3 + 11 * pi**2 * L / 2 - 65 * zeta(3) / 3 + 2 * bracket,
    }


def double_box_finite_part_at_small_x(x: mpf) -> mpf:
    """The eps^0 coefficient up to terms of order x (same source, from memory)."""
    L = log(x)
    return -(4 * L**4 / 3 + 6 * pi**2 * L**2 - 88 * zeta(3) * L / 3 + 29 * pi**4 / 30)
