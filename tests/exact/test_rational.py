import pickle
from fractions import Fraction

import flint
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from ibpred.errors import InputError
from ibpred.exact.grammar import parse_rational
from ibpred.exact.primes import first_primes, is_prime, primes_below
from ibpred.exact.rational import Rational, ring

R = ring(("x", "y", "z"))
POINT = {"x": Fraction(3, 7), "y": Fraction(-5, 2), "z": Fraction(11, 13)}

polynomials = st.dictionaries(
    st.tuples(*[st.integers(0, 2)] * 3), st.integers(-6, 6).filter(bool), max_size=4
).map(R.polynomial)
elements = st.tuples(polynomials, polynomials.filter(lambda p: not p.is_zero())).map(lambda p: R.fraction(*p))


def at(value: Rational) -> Fraction:
    """Value at POINT from the definition."""

    def of(polynomial: object) -> Fraction:
        total = Fraction(0)
        for exponents, coefficient in polynomial.to_dict().items():  # type: ignore[attr-defined]
            term = Fraction(int(coefficient))
            for name, e in zip(R.names, exponents, strict=True):
                term *= POINT[name] ** int(e)
            total += term
        return total

    bottom = of(value.denominator)
    assume(bottom != 0)
    return of(value.numerator) / bottom


def normalised(value: Rational) -> bool:
    common = value.numerator.gcd(value.denominator)
    return bool(
        value.denominator.leading_coefficient() > 0
        and (common.is_one() or (value.numerator.is_zero() and value.denominator.is_one()))
    )


@settings(max_examples=60, deadline=None)
@given(elements, elements)
def test_field_operations_are_those_of_values(a: Rational, b: Rational) -> None:
    u, v = at(a), at(b)
    results = {"+": (a + b, u + v), "-": (a - b, u - v), "*": (a * b, u * v), "neg": (-a, -u)}
    if v:
        results["/"] = (a / b, u / v)
        results["pow"] = (b**-2, v**-2)
    for result, value in results.values():
        assert normalised(result)
        assert at(result) == value
    assert (a == b) == (a - b).is_zero()
    if a == b:
        assert hash(a) == hash(b)


@settings(max_examples=60, deadline=None)
@given(elements)
def test_text_can_be_read_back(a: Rational) -> None:
    assert parse_rational(str(a), R) == a
    assert parse_rational(a.factored_text(), R) == a


@settings(max_examples=40, deadline=None)
@given(elements, elements)
def test_leibniz_rule(a: Rational, b: Rational) -> None:
    assert (a * b).derivative("y") == a.derivative("y") * b + a * b.derivative("y")


@settings(max_examples=40, deadline=None)
@given(elements)
def test_change_of_ring_there_and_back(a: Rational) -> None:
    wide = ring(("z", "w", "y", "x"))
    moved = a.to_ring(wide)
    assert moved.denominator.leading_coefficient() > 0
    assert moved.to_ring(R) == a
    assert moved == a.substitute({"x": wide.variable("x"), "y": wide.variable("y"), "z": wide.variable("z")})


@settings(max_examples=40, deadline=None)
@given(elements)
def test_modular_value_is_the_residue_of_the_value(a: Rational) -> None:
    prime = first_primes(1)[0]
    residues = [POINT[n].numerator * pow(POINT[n].denominator, -1, prime) % prime for n in R.names]
    value = at(a)
    assert a.modular(residues, prime) == value.numerator * pow(value.denominator, -1, prime) % prime


@settings(max_examples=40, deadline=None)
@given(elements)
def test_factors_multiply_to_the_element(a: Rational) -> None:
    content, factors = a.factors()
    product = R.constant(content)
    for polynomial, power in factors:
        assert not polynomial.is_constant()
        product = product * R.fraction(polynomial, R.context.constant(1)) ** power
    assert product == a


def test_substitution_of_numbers_and_elements() -> None:
    x, y = R.variable("x"), R.variable("y")
    value = (x + y) / (x - y)
    assert value.substitute({"x": 3, "y": Fraction(1, 2)}) == R.constant(Fraction(7, 5))
    assert value.substitute({"x": x * x}) == (x * x + y) / (x * x - y)
    with pytest.raises(ZeroDivisionError):
        value.substitute({"x": y})
    small = ring(("y",))
    with pytest.raises(InputError, match="x"):
        value.substitute({"y": small.variable("y")})


def test_predicates_and_conversions() -> None:
    half = R.constant(Fraction(1, 2))
    assert half.to_fraction() == Fraction(1, 2)
    assert half.is_polynomial()
    assert half.is_constant()
    assert not half.is_one()
    assert R.constant(flint.fmpq(-3, 4)).to_fraction() == Fraction(-3, 4)
    assert R.zero.to_fraction() == 0
    assert not R.zero
    x = R.variable("x")
    assert (1 / x).variables() == ("x",)
    assert not (1 / x).is_polynomial()
    assert 1 - x == -(x - 1)
    with pytest.raises(ValueError, match="constant"):
        x.to_fraction()
    with pytest.raises(InputError, match="unknown symbol 'w'"):
        R.variable("w")
    with pytest.raises(InputError, match="depends on x"):
        x.to_ring(ring(("y",)))
    with pytest.raises(TypeError, match="do not mix"):
        x + ring(("x",)).variable("x")
    with pytest.raises(ZeroDivisionError):
        x / R.zero
    with pytest.raises(ZeroDivisionError):
        R.zero**-1


def test_rings_are_unique_and_survive_pickling() -> None:
    assert ring(["x", "y", "z"]) is R
    assert pickle.loads(pickle.dumps(R)) is R
    value = (R.variable("x") - 3) / (2 * R.variable("y"))
    assert pickle.loads(pickle.dumps(value)) == value


def test_factored_text_of_a_typical_coefficient() -> None:
    value = parse_rational("-2*(x-3)/(y*(x+y)^2)", R)
    assert value.factored_text() == "-2*(x-3)/(y*(x+y)^2)"
    assert parse_rational("1/(2*x)", R).factored_text() == "1/(2*x)"
    assert R.constant(Fraction(-1, 3)).factored_text() == "-1/3"


def test_primes_descend_from_the_power_of_two() -> None:
    small = list(primes_below(6))
    assert small == [61, 59, 53, 47, 43, 41, 37, 31, 29, 23, 19, 17, 13, 11, 7, 5, 3]
    assert first_primes(3, bits=6, skip=2) == (53, 47, 43)
    assert all(is_prime(p) and p < 2**49 for p in first_primes(4))
    assert not is_prime(2**49 - 1)
