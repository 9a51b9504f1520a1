"""The massless box with one off-shell leg in all regions, against its closed form.

Z. Bern, L. Dixon, D. Kosower, hep-ph/9306240: with M the off-shell leg and
c = exp(eps gamma) Gamma(1+eps) Gamma(1-eps)^2 / Gamma(1-2 eps),

``s t I/c = 2/eps^2 [(-s)^-eps + (-t)^-eps - (-M)^-eps]
- 2 Li2(1-M/s) - 2 Li2(1-M/t) - ln(s/t)^2 - pi^2/3``

(from memory; every positive invariant has +i0).
"""

from fractions import Fraction

import pytest
from mpmath import factorial, log, mp, mpc, mpf, polylog
from solving import compare, values

POINTS = [
    ("-1", "-1/3", "-1/5"),  # Euclidean
    ("2", "-1/3", "1/5"),  # s > 0, the leg time-like
    ("2", "-1/3", "-1/5"),
    ("-2", "1/3", "1/5"),
    ("-2", "-1/3", "1/5"),
    ("2", "1/3", "3"),  # all positive: the decay of the leg
    ("-3", "-7", "11"),
]


def closed_form(s, t, m):
    """Coefficients of eps^-2, eps^-1, eps^0."""
    with mp.workdps(50):
        small = mpf(10) ** -45
        at = [mpc(mpf(x.numerator) / x.denominator, small if x > 0 else 0) for x in map(Fraction, (s, t, m))]
        logs = [log(-x) for x in at]
        poles = [2 * ((-logs[0]) ** k + (-logs[1]) ** k - (-logs[2]) ** k) / factorial(k) for k in range(3)]
        finite = -2 * polylog(2, 1 - at[2] / at[0]) - 2 * polylog(2, 1 - at[2] / at[1])
        finite += -((logs[0] - logs[1]) ** 2) - mp.pi**2 / 3 - poles[0] * mp.pi**2 / 12
        prefactor = at[0].real * at[1].real
        return {-2: poles[0] / prefactor, -1: poles[1] / prefactor, 0: (poles[2] + finite) / prefactor}


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    return tmp_path_factory.mktemp("box-one-leg")


@pytest.mark.parametrize("point", POINTS, ids=",".join)
def test_all_regions(point, folder):
    names = ("s", "t", "p4sq")
    found = values("box-one-leg", folder, dict(zip(names, point, strict=True)), 0, 30)
    box = found[1, 1, 1, 1]
    assert box.certified
    with mp.workdps(45):
        compare(box, closed_form(*point), 30)


def test_where_a_letter_vanishes_the_value_is_the_limit(folder):
    # s + t = p4sq: the box is regular there, its canonical function is not written so
    found = values("box-one-leg", folder, {"s": "1", "t": "-1/3", "p4sq": "2/3"}, 0, 10)[1, 1, 1, 1]
    with mp.workdps(45):
        near = closed_form("1", "-1/3", str(mpf(2) / 3 + mpf(10) ** -14))
        for order, reference in near.items():
            ball = found.epsilon[order]
            assert abs(mpc(ball.re, ball.im) - reference) < mpf(10) ** -9 * (1 + abs(reference))
