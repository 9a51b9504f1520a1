"""Equal-mass bananas (m = 1) by dispersion integrals over nested bubbles, with mpmath alone.

A second way beside `bessel_bananas`, at eps = 0: a bubble of lines is a superposition ``int ds' rho(s')`` of
single lines of mass^2 s', so loops are undone one after another. In d = 2 a bubble has the density
``rho_2 = 2/sqrt(s(s-4))``, a bubble of masses M, 1 the density ``2/sqrt(lambda(s, M^2, 1))``, so that the
sunrise has the complete elliptic integral

    ``rho_3(s) = int_4^((W-1)^2) ds2 4/sqrt(s2 (s2-4) lambda(s, s2, 1)) = 8 K(k^2)/((W-1) sqrt((W+3)(W-1)))``,
    ``k^2 = (W-3)(W+1)^3/((W+3)(W-1)^3)``, ``W = sqrt(s)``

(the period of Broadhurst, Fleischer, Tarasov, hep-ph/9304303; Laporta, Remiddi, hep-ph/0406160). Integrals
run on a ray from W = 3 into the lower half-plane: s + i0 is never met, below threshold or above.
"""

from __future__ import annotations

from collections.abc import Callable

from mpmath import acos, agm, cosh, exp, expjpi, log, mp, mpc, mpf, pi, quad, sin, sqrt

RAY = mpf(-1) / 5  # the direction of the ray in units of pi


def along_ray(integrand: Callable[[mpc], mpc], start: mpf) -> mpc:
    """``int dW`` from a start to infinity along the ray, by ``W = start + e^(i pi RAY) exp(v - e^-v)``."""
    direction = expjpi(RAY)
    reach = mp.dps * log(10)
    step = pi**2 / (reach * 4)
    total = mpc(0)
    v = -log(reach) - 1
    while v < reach / 2:
        size = exp(v - exp(-v))
        total += step * size * (1 + exp(-v)) * integrand(start + direction * size)
        v += step
    return direction * total


def two_dimensional_bubble(s: mpf, first: mpc, second: mpc) -> mpc:
    """``theta/(M1 M2 sin theta)``, ``cos theta = (M1^2 + M2^2 - s)/(2 M1 M2)``: bubble of masses M1, M2."""
    cosine = (first**2 + second**2 - s) / (2 * first * second)
    angle = acos(cosine)
    return (1 if abs(angle) < mpf(10) ** -mp.dps else angle / sin(angle)) / (first * second)


def two_dimensional_density(W: mpc) -> mpc:
    """``rho_3`` of the sunrise."""
    complementary = 16 * W / ((W + 3) * (W - 1) ** 3)  # 1 - k^2
    period = pi / (2 * agm(1, sqrt(complementary)))
    return 8 * period / ((W - 1) * sqrt((W + 3) * (W - 1)))


def two_dimensional_sunrise(s: mpf) -> mpc:
    """``int_9^oo ds' rho_3/(s' - s)``."""
    return along_ray(lambda W: 2 * W * two_dimensional_density(W) / (W**2 - s), mpf(3))


def two_dimensional_three_loops(s: mpf) -> mpc:
    """``int_9^oo ds' rho_3`` times the bubble of masses sqrt(s') and 1."""
    one = mpf(1)
    return along_ray(lambda W: 2 * W * two_dimensional_density(W) * two_dimensional_bubble(s, W, one), mpf(3))


def two_dimensional_four_loops(s: mpf) -> mpc:
    """The same with a second bubble, ``rho_2 ds = 4 du`` for ``s = 4 cosh(u)^2``; s below threshold."""

    def inner(W: mpc) -> mpc:
        # even in u and analytic: the trapezoidal rule converges geometrically
        reach = mp.dps * log(10)
        step = pi**2 / 2 / reach * mpf(1.1)
        total = two_dimensional_bubble(s, W, mpf(2)) / 2
        for j in range(1, int((reach + 5) / step)):
            term = two_dimensional_bubble(s, W, 2 * cosh(step * j))
            total += term
            if abs(term) < mpf(10) ** -(mp.dps + 2) * abs(total):
                break
        return 4 * step * total

    return along_ray(lambda W: 2 * W * two_dimensional_density(W) * inner(W), mpf(3))


def four_dimensional_density(W: mpc) -> mpc:
    """``int_4^((W-1)^2) ds2 sqrt(1 - 4/s2) sqrt(lambda(W^2, s2, 1))/W^2``: three-particle phase space."""
    end = (W - 1) ** 2

    def integrand(y: mpf) -> mpc:
        s2 = 4 + (end - 4) * y
        # lambda = ((W-1)^2 - s2) ((W+1)^2 - s2)
        return sqrt(1 - 4 / s2) * sqrt((end - 4) * (1 - y)) * sqrt((W + 1) ** 2 - s2)

    return (end - 4) * quad(integrand, [0, 1]) / W**2


def four_dimensional_rest(s: mpf) -> mpc:
    """``S(s) - S(0) - s S'(0)`` of the sunrise at d = 4: its poles are linear in s."""
    return s**2 * along_ray(lambda W: 2 * W * four_dimensional_density(W) / (W**4 * (W**2 - s)), mpf(3))
