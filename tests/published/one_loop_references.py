"""One-loop integrals with masses or three off-shell legs, in mpmath and independent of the package.

Conventions as in `closed_forms`. Where a region needs s + i0, formulas are written for the phases
``-s - i0 = |s| exp(-i pi)``, never with a small imaginary part.
"""

from __future__ import annotations

from collections.abc import Callable

from mpmath import (
    acos,
    acosh,
    asin,
    asinh,
    conj,
    euler,
    exp,
    expjpi,
    gamma,
    hyp2f1,
    log,
    mp,
    mpc,
    mpf,
    pi,
    polylog,
    quad,
    sqrt,
)


def half_line(function: Callable[[mpf], mpc]) -> mpc:
    """``int_0^oo dr`` of what falls like ``1/r^2`` and grows at 0 no faster than a logarithm."""
    end = mp.dps * log(10) + 10
    return quad(lambda v: exp(v) * function(exp(v)), [-end, -6, -2, 0, 2, 6, end])


# -- bubbles and the on-shell vertex: powers of m1^2 y + m2^2 (1-y) - s y (1-y) ---------------------------


def threshold_function(b: mpc, z: mpf) -> mpc:
    """``2F1(1, b; 3/2; z + i0) = int_0^1 dy (1 - 4 z y(1-y))^-b``.

    Above z = 1 by the connection formula to 1 - z, whose second function is elementary.
    """
    if z < 1:
        return hyp2f1(1, b, mpf(3) / 2, z)
    half = mpf(1) / 2
    regular = gamma(3 * half) * gamma(half - b) / (gamma(half) * gamma(3 * half - b))
    singular = gamma(3 * half) * gamma(b - half) / gamma(b)
    power = exp((half - b) * (log(z - 1) - 1j * pi))
    return regular * hyp2f1(1, b, half + b, 1 - z) + singular * power / sqrt(z)


def equal_mass_bubble(eps: mpc, s: mpf, m2: mpf) -> mpc:
    """Two lines of mass^2 m2, s below or above 4 m2."""
    return exp(eps * euler) * gamma(eps) * m2**-eps * threshold_function(eps, s / (4 * m2))


def distinct_mass_bubble(eps: mpc, s: mpf, m1sq: mpf, m2sq: mpf) -> mpc:
    """Two lines of distinct masses: ``Gamma(eps) int_0^1 dy F^-eps``, split where F changes sign."""

    def second(y: mpf) -> mpf:
        return m1sq * y + m2sq * (1 - y) - s * y * (1 - y)

    total = mpc(0)
    for low, high in zip(*split(s, m1sq, m2sq), strict=True):
        phase = exp(1j * pi * eps) if second((low + high) / 2) < 0 else 1
        total += phase * quad(lambda y: abs(second(y)) ** -eps, [low, high])
    return exp(eps * euler) * gamma(eps) * total


def split(s: mpf, m1sq: mpf, m2sq: mpf) -> tuple[list[mpf], list[mpf]]:
    """Left and right ends of the intervals of [0, 1] in which F keeps its sign."""
    kallen = (s - m1sq - m2sq) ** 2 - 4 * m1sq * m2sq
    ends = [mpf(0), mpf(1)]
    if s > (sqrt(m1sq) + sqrt(m2sq)) ** 2:
        ends[1:1] = [(s + m2sq - m1sq + sign * sqrt(kallen)) / (2 * s) for sign in (-1, 1)]
    return ends[:-1], ends[1:]


def distinct_mass_bubble_finite(s: mpf, m1sq: mpf, m2sq: mpf) -> mpc:
    """The eps^0 coefficient ('t Hooft, Veltman, Nucl. Phys. B153 (1979) 365), X = m1sq + m2sq - s.

    ``2 - log(m1 m2) + (m1sq - m2sq)/s log(m2/m1) + sqrt(lambda)/s log((X + sqrt(lambda))/(2 m1 m2))``
    """
    X, scale = m1sq + m2sq - s, sqrt(m1sq * m2sq)
    kallen = X**2 - 4 * scale**2
    common = 2 - log(scale) + (m1sq - m2sq) / s * log(m2sq / m1sq) / 2
    if kallen < 0:
        return mpc(common - sqrt(-kallen) / s * acos(X / (2 * scale)))
    logarithm = log((abs(X) + sqrt(kallen)) / (2 * scale))
    return common + sqrt(kallen) / s * (logarithm if X > 0 else 1j * pi - logarithm)


def on_shell_vertex(eps: mpc, s: mpf, m2: mpf) -> mpc:
    """Massless exchange between two on-shell lines of mass^2 m2, (p1+p2)^2 = s.

    ``F = m2 (x2+x3)^2 - s x2 x3``; with ``x2 + x3 = rho`` the integral over rho gives -1/(2 eps) (infrared)
    and ``int_0^1 dy (m2 - s y(1-y))^(-1-eps)`` is left.
    """
    line = m2 ** (-1 - eps) * threshold_function(1 + eps, s / (4 * m2))
    return -exp(eps * euler) * gamma(1 + eps) / (2 * eps) * line


# -- three off-shell legs --------------------------------------------------------------------------------


def bloch_wigner_triangle(p1sq: mpf, p2sq: mpf, s: mpf) -> mpc:
    """Massless triangle at eps^0 in the Euclidean region, ``4 i D(z)/((z - zb)(-s))``.

    ``z zb = p1sq/s, (1-z)(1-zb) = p2sq/s``; D is the Bloch-Wigner dilogarithm where z and zb are conjugate
    (Usyukina, Davydychev, Phys. Lett. B298 (1993) 363; Zagier, The dilogarithm function).
    """
    u, v = p1sq / s, p2sq / s
    root = sqrt(mpc((1 + u - v) ** 2 - 4 * u))
    z, zb = (1 + u - v + root) / 2, (1 + u - v - root) / 2
    if root.imag == 0:
        # z, zb are both below 0, within (0, 1), or above 1: the polylogarithms' cuts cancel
        z, zb = z.real, zb.real
        logarithm = log(abs(z * zb)) * log(abs((1 - z) / (1 - zb)))
        value = 2 * (polylog(2, z).real - polylog(2, zb).real) + logarithm
    else:
        value = 2 * polylog(2, z) - 2 * polylog(2, zb) + log(u) * log((1 - z) / conj(1 - z))
    return value / (z - zb) / -s


def triangle_with_three_legs(p1sq: mpf, p2sq: mpf, s: mpf) -> mpc:
    """The same in any region (+ i0), as one integral; not manifestly symmetric.

    ``F = a x1 x2 + b x2 x3 + c x3 x1`` with a, b, c = minus the invariants; at x3 = 1 the integral over x2 is
    ``int dx (log(a x + b) + log(1+x) - log x - log c)/((a x + b)(1+x) - c x)``. As an invariant turns
    positive, a -> |a| exp(-i theta) up to theta = pi, the path of x turns by half as much against it, so that
    a x + b never vanishes and the total phase stays within pi: the denominator's zeros stay removable.
    """
    a, b, c = -p1sq, -p2sq, -s
    turn, offset = 0, 0  # in half turns: of x; taken out of a x + b
    if a < 0 < b:
        turn = mpf(1) / 2
    elif b < 0 < a:
        turn, offset = -mpf(1) / 2, -mpf(1) / 2
    elif a < 0 and b < 0:
        offset = -1
    direction = expjpi(turn)
    fixed = 1j * pi * (offset - turn) - (log(abs(c)) - (1j * pi if c < 0 else 0))

    def integrand(r: mpf) -> mpc:
        x = direction * r
        first = a * x + b
        phases = log(first * expjpi(-offset)) + log(1 + x) - log(r) + fixed
        return phases / (first * (1 + x) - c * x)

    return direction * half_line(integrand)


# -- massive loops, light-like legs ----------------------------------------------------------------------


def massive_triangle(s: mpf) -> mpc:
    """Three lines of mass 1, one leg s, eps^0: ``(2/(-s)) asinh(sqrt(-s)/2)^2``."""
    if s < 0:
        return mpc(2 / -s * asinh(sqrt(-s) / 2) ** 2)
    if s < 4:
        return mpc(2 / s * asin(sqrt(s) / 2) ** 2)
    return 2 / s * (pi / 2 + 1j * acosh(sqrt(s) / 2)) ** 2


def spectral_factor(x: mpc) -> mpc:
    """``asinh(sqrt(x))/sqrt(x(1+x)) = 2F1(1, 1; 3/2; -x)``, cut for x < -1."""
    return hyp2f1(1, 1, mpf(3) / 2, -x) if abs(x) < mpf("0.1") else asinh(sqrt(x)) / sqrt(x) / sqrt(1 + x)


def massive_box(s: mpf, t: mpf) -> mpc:
    """Four lines of mass 1, light-like legs, eps^0, as a dispersion integral: s, t not both above 4 (+ i0).

    The double spectral density is ``2/sqrt(s t (s t - 4 s - 4 t))`` (Mandelstam); its integral over t'
    leaves

        ``int_4^oo ds' sqrt(1 - 4/s') g(-t (s'-4)/(4 s')) / (s' (s' - s))``,  g = `spectral_factor`.

    s' runs into the lower half-plane, away from s + i0. At s = t = 0 this is 1/6, the volume of the simplex.
    For t > 4 + i0 the singularity of g at ``s' (t - 4) = 4 t`` lies below the axis: then s' turns upwards,
    which s must allow (s < 4).
    """
    if s > 4 and t > 4:
        raise ValueError("both invariants above threshold: no region of real momenta, not written down")
    up = t > 4

    def integrand(W: mpc) -> mpc:
        square = W**2
        root = sqrt(1 - 4 / square)
        return 2 * W * root * spectral_factor(-t * (square - 4) / (4 * square)) / (square * (square - s))

    direction = expjpi(mpf(1 if up else -1) / 5)
    return direction * half_line(lambda r: integrand(2 + direction * r))


def massive_box_by_parameters(s: mpf, t: mpf) -> mpf:
    """The same for s, t < 0 from Feynman's parameters, one integral of three done by hand.

    Opposite lines share rho and 1 - rho: ``F = 1 - s rho^2 y(1-y) - t (1-rho)^2 z(1-z)``; over z, with
    ``int_0^1 dz/(A + a z(1-z)) = 4 asinh(w)/R``, ``w^2 = a/(4A)``, ``R^2 = a(4A + a)``, differentiated by A.
    """

    def over_z(A: mpf, a: mpf) -> mpf:
        w, R = sqrt(a / (4 * A)), sqrt(a * (4 * A + a))
        return 4 * (w / (2 * A * sqrt(1 + w * w)) / R + asinh(w) * 2 * a / R**3)

    def integrand(rho: mpf, y: mpf) -> mpf:
        return rho * (1 - rho) * over_z(1 - s * rho**2 * y * (1 - y), -t * (1 - rho) ** 2)

    return 2 * quad(integrand, [0, 1], [0, mpf(1) / 2])
