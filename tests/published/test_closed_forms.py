"""The closed forms against Feynman-parameter integrals at an eps where these converge."""

import closed_forms as cf
import pytest
from mpmath import euler, exp, gamma, log, mp, mpf, quad, zeta

EPS = mpf(-3) / 10


@pytest.fixture(autouse=True)
def _digits():
    with mp.workdps(20):
        yield


def close(a, b, digits=10):
    assert abs(a - b) <= abs(b) * mpf(10) ** -digits, (a, b)


def two_point(f):
    """exp(eps gamma) Gamma(2-d/2) int dy f(y)^-eps."""
    return exp(EPS * euler) * gamma(EPS) * quad(lambda y: f(y) ** -EPS, [0, mpf(1) / 2, 1])


def test_bubbles():
    close(cf.bubble(EPS, log(mpf(3))), two_point(lambda y: 3 * y * (1 - y)), 8)
    close(cf.one_mass_bubble(EPS, mpf(-3), mpf(2)), two_point(lambda y: (1 - y) * (2 + 3 * y)), 8)
    close(cf.equal_mass_bubble(EPS, mpf(-3), mpf(2)), two_point(lambda y: 2 + 3 * y * (1 - y)), 8)


def test_triangles_and_box():
    # int over the simplex of Gamma(n - d/2) F^(d/2 - n) U^(n - d), U = 1
    def simplex3(F):
        def inner(a):
            return quad(lambda b: (1 - a) * F(a, (1 - a) * b, (1 - a) * (1 - b)) ** (-1 - EPS), [0, 1])

        return exp(EPS * euler) * gamma(1 + EPS) * quad(inner, [0, 1])

    s, t = mpf(2), mpf(5)
    with mp.workdps(12):
        two = simplex3(lambda a, b, c: b * (a * s + c * t))
        one = simplex3(lambda a, b, c: s * b * c)
    close(cf.two_leg_triangle(EPS, log(s), log(t)), two, 3)
    close(cf.one_leg_triangle(EPS, log(s)), one, 3)


def test_box_expansion_and_forms_agree():
    # Bern, Dixon, Kosower: eps^2 st (-s)^eps I4 / c = 2 (1 + x^-eps) - eps^2 (log^2 x + pi^2) + O(eps^3)
    x = mpf(2) / 7
    found = cf.laurent_coefficients(lambda e: cf.box_bracket_euclidean(e, x), 0, 2, 15)
    L = log(x)
    close(found[0], 4)
    close(found[1], -2 * L)
    close(found[2], -(mp.pi**2))
    # both forms are one analytic function: continue around the origin close to the negative axis
    for turns in (1, -1):
        z = x * mp.expjpi(turns * mpf("0.999999999999"))
        a = cf.box_bracket_euclidean(EPS, z)
        close(a, cf.box_bracket_continued(EPS, -x, turns), 9)


def test_propagators():
    # the two-loop forms' well-known first terms: 1/eps poles of the sunrise, 6 zeta(3) of the kite
    found = cf.laurent_coefficients(lambda e: cf.sunrise(e, mpf(0)), -2, -1, 15)
    assert abs(found[-2]) < 1e-12
    close(found[-1], mpf(-1) / 4)
    found = cf.laurent_coefficients(lambda e: cf.kite(e, mpf(0)), -2, 0, 15)
    assert abs(found[-2]) < 1e-12
    assert abs(found[-1]) < 1e-12
    close(found[0], 6 * zeta(3))
