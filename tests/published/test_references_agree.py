"""The references themselves, each against a second way: nothing of the package is used here."""

from itertools import permutations

import bessel_bananas as bessel
import closed_forms as closed
import dispersive_bananas as dispersive
import one_loop_references as one_loop
import pytest
from mpmath import clsin, exp, inf, mp, mpf, nsum, pi, sqrt, zeta


@pytest.fixture(autouse=True)
def _digits():
    with mp.workdps(40):
        yield


def close(first, second, digits):
    return abs(first - second) < mpf(10) ** -digits * max(1, abs(second))


def moment(lines, s, digits):
    """A banana of unit masses at d = 2, eps = 0."""
    return bessel.coefficients(2, (1,) * lines, (1,) * lines, mpf(s), (0, 0), digits)[0]


class TestBesselMoments:
    """Bailey, Borwein, Broadhurst, Glasser, arXiv:0801.0891: moments that are known in closed form."""

    def test_sunrise_at_the_pseudo_threshold(self):
        # int x I0(x) K0(x)^3 = pi^2/16
        assert close(moment(3, 1, 30), pi**2 / 4, 30)

    @pytest.mark.slow
    def test_sunrise_at_zero(self):
        # int x K0(x)^3 = (3/4) L_{-3}(2), L_{-3}(2) = (2/sqrt(3)) Cl_2(2 pi/3)
        assert close(moment(3, 0, 30), 6 / sqrt(3) * clsin(2, 2 * pi / 3), 30)

    @pytest.mark.slow
    def test_three_loops_at_zero(self):
        # int x K0(x)^4 = 7 zeta(3)/8
        assert close(moment(4, 0, 30), 7 * zeta(3), 30)

    @pytest.mark.slow
    def test_three_loops_at_the_pseudo_threshold(self):
        # int x I0(x) K0(x)^4 = pi^2 C, C = (pi/16)(1 - 1/sqrt(5)) (1 + 2 sum exp(-n^2 pi sqrt(15)))^4
        theta = 1 + 2 * nsum(lambda n: exp(-(n**2) * pi * sqrt(15)), [1, inf])
        assert close(moment(4, 1, 30), pi**3 / 2 * (1 - 1 / sqrt(5)) * theta**4, 30)


class TestDispersionAgainstMoments:
    @pytest.mark.parametrize("s", [-2, pytest.param(11, marks=pytest.mark.slow)])
    def test_sunrise(self, s):
        with mp.workdps(30):
            assert close(dispersive.two_dimensional_sunrise(mpf(s)), moment(3, s, 20), 18)

    @pytest.mark.slow
    @pytest.mark.parametrize("s", [0, 1, 20])
    def test_three_loops(self, s):
        with mp.workdps(30):
            assert close(dispersive.two_dimensional_three_loops(mpf(s)), moment(4, s, 20), 18)

    @pytest.mark.slow
    @pytest.mark.parametrize("s", [0, 1])
    def test_four_loops(self, s):
        with mp.workdps(15):
            found = dispersive.two_dimensional_four_loops(mpf(s))
        assert close(found, moment(5, s, 15), 10)

    @pytest.mark.slow
    @pytest.mark.parametrize("s", [-2, 11])
    def test_sunrise_in_four_dimensions(self, s):
        def finite(at):
            return bessel.coefficients(4, (1, 1, 1), (1, 1, 1), at, (0, 0), 25)[0]

        # S'(0) by central differences of order six
        with mp.workdps(30):
            h = mpf(1) / 100
            wide = [finite(k * h) - finite(-k * h) for k in (1, 2, 3)]
            slope = (45 * wide[0] - 9 * wide[1] + wide[2]) / (60 * h)
            rest = finite(mpf(s)) - finite(mpf(0)) - s * slope
        with mp.workdps(15):
            assert close(dispersive.four_dimensional_rest(mpf(s)), rest, 10)


class TestSunriseInFourDimensions:
    @pytest.mark.slow
    def test_at_zero(self):
        """Davydychev, Tausk, Nucl. Phys. B397 (1993) 123; from memory, normalised by Gamma(1+eps)^2."""
        found = bessel.coefficients(4, (1, 1, 1), (1, 1, 1), mpf(0), (-2, 0), 25)
        with mp.workdps(30):
            finite = -mpf(21) / 2 + 6 / sqrt(3) * clsin(2, pi / 3) - pi**2 / 4
            for order, value in ((-2, mpf(-3) / 2), (-1, mpf(-9) / 2), (0, finite)):
                assert close(found[order], value, 25)

    @pytest.mark.slow
    def test_on_shell(self):
        """-3/2, -17/4, -59/8 (Broadhurst, Z. Phys. C47 (1990) 115), normalised by Gamma(1+eps)^2."""
        found = bessel.coefficients(4, (1, 1, 1), (1, 1, 1), mpf(1), (-2, 0), 30)
        with mp.workdps(35):
            for order, value in ((-2, mpf(-3) / 2), (-1, mpf(-17) / 4), (0, -mpf(59) / 8 - pi**2 / 4)):
                assert close(found[order], value, 30)

    @pytest.mark.slow
    def test_dimension_shift(self):
        """``I^(d-2)(1,1,1) = 3 I^(d)(2,2,1)``: U put into the parametric form (Tarasov, hep-th/9606018)."""
        low = bessel.coefficients(2, (1, 1, 1), (1, 1, 1), mpf(-2), (0, 1), 25)
        high = bessel.coefficients(4, (2, 2, 1), (1, 1, 1), mpf(-2), (0, 1), 25)
        for order in (0, 1):
            assert close(3 * high[order], low[order], 24)


class TestBubbles:
    """Bessel moments at one loop against hypergeometric functions and logarithms."""

    @pytest.mark.slow
    @pytest.mark.parametrize("s", [-3, 7])
    def test_equal_masses(self, s):
        moments = bessel.coefficients(4, (1, 1), (1, 1), mpf(s), (-1, 1), 20)
        found = closed.laurent_coefficients(
            lambda eps: one_loop.equal_mass_bubble(eps, mpf(s), mpf(1)), -1, 1, 25
        )
        for order, value in found.items():
            assert close(value, moments[order], 20)

    @pytest.mark.parametrize("s", [-3, 7])
    def test_equal_masses_closed_form(self, s):
        if s < 0:
            first = closed.laurent_coefficients(
                lambda eps: closed.equal_mass_bubble(eps, mpf(s), mpf(1)), -1, 1, 25
            )
            second = closed.laurent_coefficients(
                lambda eps: one_loop.equal_mass_bubble(eps, mpf(s), mpf(1)), -1, 1, 25
            )
            assert all(close(first[k], second[k], 25) for k in first)
        finite = closed.laurent_coefficients(
            lambda eps: one_loop.equal_mass_bubble(eps, mpf(s), mpf(1)), -1, 0, 25
        )[0]
        with mp.workdps(30):
            assert close(finite, one_loop.distinct_mass_bubble_finite(mpf(s), mpf(1), mpf(1)), 25)

    @pytest.mark.parametrize("s", [-3, mpf(1) / 20, 1, 7])
    def test_distinct_masses(self, s):
        found = bessel.small_circle(
            lambda eps: one_loop.distinct_mass_bubble(eps, mpf(s), mpf(1), mpf(2)), -1, 1, 20, s < 5
        )
        with mp.workdps(30):
            assert close(found[0], one_loop.distinct_mass_bubble_finite(mpf(s), mpf(1), mpf(2)), 20)

    @pytest.mark.slow
    @pytest.mark.parametrize("s", [-3, 7])
    def test_distinct_masses_by_moments(self, s):
        with mp.workdps(30):
            root = sqrt(mpf(2))
        with mp.workdps(60):
            square = root**2
        moments = bessel.coefficients(4, (1, 1), (1, root), mpf(s), (-1, 1), 20)
        found = bessel.small_circle(
            lambda eps: one_loop.distinct_mass_bubble(eps, mpf(s), mpf(1), square), -1, 1, 20, s < 5
        )
        for order, value in found.items():
            assert close(value, moments[order], 20)


class TestTriangleWithThreeLegs:
    @pytest.mark.parametrize(
        "legs", [("-1/5", "-1/7", "-1"), ("-3/5", "-6/7", "-1"), ("-3", "-1/7", "-1"), ("-2", "-9", "-1")]
    )
    def test_bloch_wigner(self, legs):
        with mp.workdps(30):
            point = [mp.convert(leg) for leg in legs]
            assert close(
                one_loop.triangle_with_three_legs(*point), one_loop.bloch_wigner_triangle(*point), 27
            )

    @pytest.mark.parametrize("legs", [(2, -3, -5), (2, 3, -5), (2, 3, 15), (2, 3, 4)])
    def test_symmetry(self, legs):
        with mp.workdps(25):
            values = [one_loop.triangle_with_three_legs(*map(mpf, order)) for order in permutations(legs)]
            assert all(close(value, values[0], 22) for value in values)


class TestMassiveBox:
    def test_parameters(self):
        for point in ((-3, -mpf(1) / 3), (-10, -7)):
            with mp.workdps(15):
                direct = one_loop.massive_box_by_parameters(*map(mpf, point))
            assert close(one_loop.massive_box(*map(mpf, point)), direct, 11)

    @pytest.mark.parametrize("point", [(-3, -1), (3, -1), (7, -2), (40, -1)])
    def test_dispersion_in_either_invariant(self, point):
        s, t = map(mpf, point)
        with mp.workdps(25):
            assert close(one_loop.massive_box(s, t), one_loop.massive_box(t, s), 22)

    @pytest.mark.parametrize("s", [-3, 3, 7])
    def test_triangle(self, s):
        """The density of ``-int dx log(1 - s x(1-x))/(s x)`` is ``(2/s) acosh(sqrt(s)/2)``."""
        direction = mp.expjpi(mpf(-1) / 5)

        def integrand(r):
            W = 2 + direction * r
            return 2 * W * 2 / W**2 * mp.acosh(W / 2) / (W**2 - s)

        with mp.workdps(25):
            integral = direction * one_loop.half_line(integrand)
            assert close(one_loop.massive_triangle(mpf(s)), integral, 20)
