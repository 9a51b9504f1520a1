"""Banana integrals (two points joined by massive lines) as moments of Bessel functions, with mpmath alone.

In position space the loop momenta are gone: the integral is the Fourier transform of a product of
propagators, one radial integral at any number of loops. A Euclidean line ``1/(k^2 + m^2)^a`` becomes

    ``2^(1-a)/Gamma(a) (2 pi)^(-d/2) L(x)``,  ``L(x) = (m/x)^(d/2-a) K_(d/2-a)(m x)``,

and with ``nu = d/2 - 1``, measure ``exp(l eps gamma_E) prod d^d k/(i pi^(d/2))`` for l loops and lines
``m^2 - q^2`` that gives

    ``I = exp(l eps gamma_E) 2^(l d/2) prod(2^(1-a)/Gamma(a))
          int_0^oo dx x^(1+nu) (-s)^(-nu/2) J_nu(sqrt(-s) x) prod L(x)``.

In d = 2 these are the Bessel moments of Bailey, Borwein, Broadhurst, Glasser, arXiv:0801.0891, and
Groote, Koerner, Pivovarov, hep-ph/0506286. Below the threshold ``s < (sum m)^2`` the integral converges at
infinity as it stands. Above it, write I_nu through K_nu (z) and K_nu (z exp(-i pi)); the second part is
continued in s + i0 by turning x to ``r exp(i pi)``, which leaves (derivation in `banana`)

    ``exp(i pi nu)/(i pi) int_0^oo dr r^(1+nu) s^(-nu/2) K_nu(sqrt(s) r) (prod L(r exp(i pi)) - prod L(r))``.

The integral from 0 to 1 is done term by term from the power series of the Bessel functions, which continues
it in eps (ultraviolet divergences are poles of those terms); the rest by a double-exponential rule.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import lru_cache

from mpmath import besseli, cosh, euler, exp, expjpi, gamma, hyp0f1, log, mp, mpc, mpf, pi, sqrt

Series = list[mpc]  # coefficients of x^(2j)
Sectioned = dict[int, Series]  # k: the part that goes with x^(-2 nu k)


@dataclass(frozen=True)
class Line:
    """A line's mass and power (a positive integer)."""

    mass: mpf
    power: int = 1


# -- near x = 0 -----------------------------------------------------------------------------------------


def terms_wanted(scale: mpf) -> int:
    """How many terms of ``sum (scale/2)^(2j)/j!^2`` reach the working precision."""
    count, term = 0, mpf(1)
    while term > mpf(10) ** -(mp.dps + 5) or count < scale:
        count += 1
        term *= (scale / 2) ** 2 / count**2
    return count + 3


def entire(order: mpc, factor: mpc, count: int) -> Series:
    """``0F1(; order + 1; factor x^2)``."""
    found, term = [], mpc(1)
    for j in range(count):
        found.append(term)
        term = term * factor / ((j + 1) * (order + 1 + j))
    return found


def near_zero(line: Line, nu: mpc, half_turns: int, count: int) -> Sectioned:
    """``L`` at ``r exp(i pi half_turns)`` as series in r: the two solutions of Bessel's equation."""
    order = nu + 1 - line.power
    m = line.mass
    shift = line.power - 1  # x^(-2 order) = x^(-2 nu) x^(2 shift)
    singular = gamma(order) * mpf(2) ** (order - 1) * expjpi(-2 * order * half_turns)
    regular = gamma(-order) * mpf(2) ** (-order - 1) * m ** (2 * order)
    first = [mpc(0)] * shift + [singular * c for c in entire(-order, m**2 / 4, count)]
    return {0: [regular * c for c in entire(order, m**2 / 4, count)], 1: first[:count]}


def product(first: Sectioned, second: Sectioned) -> Sectioned:
    found: Sectioned = {}
    for k, a in first.items():
        for n, b in second.items():
            into = found.setdefault(k + n, [mpc(0)] * len(a))
            for i, c in enumerate(a):
                if c:
                    for j in range(len(a) - i):
                        into[i + j] += c * b[j]
    return found


def up_to_one(integrand: Sectioned, nu: mpc) -> mpc:
    """``int_0^1 x^(1+2 nu)`` times the series, continued in nu."""
    return sum(
        c / (2 + 2 * nu - 2 * nu * k + 2 * j) for k, series in integrand.items() for j, c in enumerate(series)
    )


# -- from x = 1 on --------------------------------------------------------------------------------------


@lru_cache(maxsize=64)
def outer_rule(decay: mpf, digits: int) -> tuple[tuple[mpf, mpf], ...]:
    """Nodes and weights on [1, oo) for functions that fall like ``exp(-decay x)``.

    The double-exponential substitution ``x = 1 + exp(v - exp(-v))/decay`` (Takahasi, Mori) and the
    trapezoidal rule. The step is for functions analytic in |Im v| < pi/2, about.
    """
    reach = digits * log(10)
    step = pi**2 / (reach * mpf(1.6))
    low = -log(reach) - 1
    found = []
    v = low
    while v < log(reach) + 1:
        stretched = exp(v - exp(-v)) / decay
        found.append((1 + stretched, step * stretched * (1 + exp(-v))))
        v += step
    return tuple(found)


@lru_cache(maxsize=64)
def cosine_kernel(
    mass: mpf, nodes: tuple[mpf, ...], digits: int
) -> tuple[tuple[mpf, ...], tuple[tuple[int, tuple[mpf, ...]], ...]]:
    """``exp(-m x cosh t)`` on a grid of t for each x: ``K_a(z) = int_0^oo exp(-z cosh t) cosh(a t) dt``.

    The trapezoidal rule errs by about ``exp(-pi^2/step)`` (the integrand is analytic and bounded in
    |Im t| < pi/2); the step is small enough for that to be digits smaller than ``exp(-m x)``. Where x is
    small every stride-th point of the grid will do.
    """
    reach = digits * log(10) + 5
    step = pi**2 / (reach + mass * nodes[-1])
    rows = []
    highest = 0
    for x in nodes:
        stride = int((reach + mass * nodes[-1]) / (reach + mass * x))
        row: list[mpf] = []
        while True:
            exponent = mass * x * (cosh(step * stride * len(row)) - 1)
            if exponent > reach:
                break
            row.append(stride * step * exp(-exponent - mass * x) / (1 if row else 2))
        rows.append((stride, tuple(row)))
        highest = max(highest, stride * (len(row) - 1))
    return tuple(step * j for j in range(highest + 1)), tuple(rows)


def macdonald(order: mpc, mass: mpf, nodes: tuple[mpf, ...], digits: int) -> list[mpc]:
    """``K_order(m x)`` at the nodes."""
    grid, rows = cosine_kernel(mass, nodes, digits)
    cosines = [mp.cosh(order * t) for t in grid]
    real, imaginary = [c.real for c in cosines], [c.imag for c in cosines]
    found = []
    for stride, row in rows:
        part = slice(0, stride * len(row), stride)
        found.append(mpc(mp.fdot(row, real[part]), mp.fdot(row, imaginary[part])))
    return found


@dataclass(frozen=True)
class Sampled:
    """``L`` of a line at the nodes, and at the nodes turned by ``exp(i pi)``."""

    plain: list[mpc]
    turned: list[mpc]


def outside(line: Line, nu: mpc, nodes: tuple[mpf, ...], digits: int, turn: bool) -> Sampled:
    """``L`` at the nodes: ``K_a(z exp(i pi)) = exp(-i pi a) K_a(z) - i pi I_a(z)``."""
    order = nu + 1 - line.power
    phase = expjpi(-order)
    plain, turned = [], []
    for x, value in zip(nodes, macdonald(order, line.mass, nodes, digits), strict=True):
        factor = (line.mass / x) ** order
        plain.append(factor * value)
        if turn:
            growing = mpc(0, 1) * pi * besseli(order, line.mass * x)
            turned.append(factor * phase * (phase * value - growing))
    return Sampled(plain, turned)


def from_one(wave: list[mpc], columns: list[list[mpc]], nu: mpc, rule: tuple[tuple[mpf, mpf], ...]) -> mpc:
    """``int_1^oo x^(1+2 nu)`` times a wave and the lines, all given at the nodes of the rule."""
    total = mpc(0)
    for i, (x, weight) in enumerate(rule):
        term = weight * x ** (1 + 2 * nu) * wave[i]
        for column in columns:
            term *= column[i]
        total += term
    return total


# -- the integral ---------------------------------------------------------------------------------------


def banana(eps: mpc, dimension: int, lines: Sequence[Line], s: mpf) -> mpc:
    """A banana in ``d = dimension - 2 eps``, at any real s (+ i0) but its threshold.

    ``nu = dimension/2 - 1 - eps`` must not be an integer: take eps on a circle.

    Above the threshold: ``I_nu(z) = (K_nu(z e^(-i pi)) - e^(i pi nu) K_nu(z))/(i pi)``. Along s + i0 the
    exponent ``(sqrt(s) - sum m) x`` of the first part turns from negative to positive through the upper
    half-plane, so x must turn by +pi for it to keep falling; then ``x = r e^(i pi)``, the first factor is
    ``K_nu(sqrt(s) r)`` again and ``x^(1+nu) dx`` gives ``e^(i pi nu)``.
    """
    d = dimension - 2 * eps
    nu = d / 2 - 1
    loops = len(lines) - 1
    digits = mp.dps
    prefactor = exp(loops * eps * euler) * mpf(2) ** (loops * d / 2)
    for line in lines:
        prefactor *= mpf(2) ** (1 - line.power) / gamma(line.power)
    threshold = sum(line.mass for line in lines) ** 2
    if s == threshold:
        raise ValueError("the integral is singular at its threshold")
    scale = max([line.mass for line in lines] + [sqrt(abs(s))])
    count = terms_wanted(scale * len(lines))
    distinct = set(lines)
    if s < threshold:
        rule = outer_rule(sqrt(threshold) - (sqrt(s) if s > 0 else 0), digits)
        nodes = tuple(x for x, _ in rule)
        normal = mpf(2) ** -nu / gamma(1 + nu)
        inner = {0: [normal * c for c in entire(nu, s / 4, count)]}
        near = {line: near_zero(line, nu, 0, count) for line in distinct}
        for line in lines:
            inner = product(inner, near[line])
        far = {line: outside(line, nu, nodes, digits, False).plain for line in distinct}
        wave = [normal * hyp0f1(nu + 1, s * x**2 / 4) for x in nodes]
        return prefactor * (up_to_one(inner, nu) + from_one(wave, [far[line] for line in lines], nu, rule))
    rule = outer_rule(sqrt(s) - sqrt(threshold), digits)
    nodes = tuple(x for x, _ in rule)
    kernel = Line(sqrt(s))
    wave = outside(kernel, nu, nodes, digits, False).plain
    sampled = {line: outside(line, nu, nodes, digits, True) for line in distinct}
    total = mpc(0)
    for half_turns, sign in ((1, 1), (0, -1)):
        inner = near_zero(kernel, nu, 0, count)
        near = {line: near_zero(line, nu, half_turns, count) for line in distinct}
        for line in lines:
            inner = product(inner, near[line])
        far = {line: value.turned if half_turns else value.plain for line, value in sampled.items()}
        total += sign * (up_to_one(inner, nu) + from_one(wave, [far[line] for line in lines], nu, rule))
    return prefactor * expjpi(nu) / (mpc(0, 1) * pi) * s**-nu * total


def small_circle(
    function: Callable[[mpc], mpc], lowest: int, highest: int, digits: int, real: bool
) -> dict[int, mpc]:
    """Laurent coefficients at eps = 0 from few points on a small circle.

    With radius r the coefficient of ``eps^k`` is met by those of ``eps^(k+n)`` times ``r^n``; these grow like
    ``R^-(k+n)``, R the distance to the next pole (1/2 or more divided by the loops here). Few points need a
    small r, which costs ``r^-k`` in digits: the working precision pays for that.

    Parameters
    ----------
    real
        The function is real on the real axis, so that half the points do.
    """
    radius = mpf(1) / 2**24
    count = (highest - lowest) + 2 + int(digits * log(10) / log(2**24 / 12)) + 1
    count += count % 2
    with mp.workdps(digits + 10 + int(7.3 * (highest - lowest + 1))):
        upper = []
        for j in range(count // 2 if real else count):
            eps = radius * expjpi(mpf(2 * j + 1) / count)
            upper.append((eps, function(eps) * eps**-lowest))
        if real:
            upper += [(eps.conjugate(), value.conjugate()) for eps, value in upper]
        found = {}
        for k in range(highest - lowest + 1):
            found[lowest + k] = sum(value * eps**-k for eps, value in upper) / count
    return {k: +value for k, value in found.items()}


def coefficients(
    dimension: int, powers: Sequence[int], masses: Sequence[mpf], s: mpf, orders: tuple[int, int], digits: int
) -> dict[int, mpc]:
    """Laurent coefficients of a banana, orders (lowest, highest).

    The Bessel functions near ``nu`` integer are differences of numbers ``1/eps`` times larger, one factor a
    line: the working precision grows with the number of lines.
    """
    lines = [Line(mpf(m), a) for m, a in zip(masses, powers, strict=True)]
    below = s < sum(line.mass for line in lines) ** 2

    def function(eps: mpc) -> mpc:
        with mp.workdps(mp.dps + int(7.3 * (len(lines) + 1)) + 5):
            return banana(eps, dimension, lines, mpf(s))

    lowest, highest = orders
    return small_circle(function, lowest, highest, digits, below)
