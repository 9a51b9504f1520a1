from fractions import Fraction
from pathlib import Path

import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from ibpred.errors import InputError
from ibpred.exact.grammar import parse_rational
from ibpred.family.definition import FamilyDefinition
from ibpred.family.kinematics import dimension_of
from ibpred.family.reading import read_family
from ibpred.family.units import integral_dimension, restore_unit, set_unit


def family(invariants: str, unit: str) -> FamilyDefinition:
    text = f"""
[momenta]
loop = ["k"]
external = ["p"]
[kinematics]
invariants = {{ {invariants} }}
equations = ["p^2 = s"]
unit = "{unit}"
[[line]]
momentum = "k"
[[line]]
momentum = "k+p"
"""
    return read_family(text, "u.toml", "u")


MIXED = family("m = 1, s = 2, z = 0, q4 = 4, r = -1", "m")


def test_dimension_of_an_integral() -> None:
    path = Path(__file__).parents[2] / "families" / "planar-double-box.toml"
    box = read_family(path.read_text(), path.name, path.stem)
    assert integral_dimension(box, (1,) * 7 + (0, 0)) == (2 * 4 - 14, -4)
    assert integral_dimension(box, (1,) * 7 + (-1, 0)) == (-4, -4)
    with pytest.raises(InputError, match="9 lines, 7 powers"):
        integral_dimension(box, (1,) * 7)
    path = path.with_stem("heavy-quark-self-energy")
    static = read_family(path.read_text(), path.name, path.stem)
    assert integral_dimension(static, (1, 2)) == (4 - 2 - 2, -2)


def test_the_unit_of_a_bubble() -> None:
    bubble = family("s = 2, t = 2", "s")
    value = parse_rational("(d-3)/(t*(1+t))", bubble.internal_ring)
    full = bubble.full_ring
    assert restore_unit(value, -4, bubble) == parse_rational("(d-3)/(t*(s+t))", full)
    assert restore_unit(value, 2, bubble) == parse_rational("s^3*(d-3)/(t*(s+t))", full)
    assert set_unit(parse_rational("(d-3)*s^7/(t*(s+t))", full), bubble) == value
    with pytest.raises(InputError, match="choose another unit"):
        restore_unit(value, 1, bubble)
    with pytest.raises(ZeroDivisionError):
        set_unit(parse_rational("1/(s-1)", full), bubble)


monomials = st.tuples(*[st.integers(0, 3)] * 5)
polynomials = st.dictionaries(monomials, st.integers(-5, 5).filter(bool), min_size=1, max_size=4)


@settings(max_examples=60, deadline=None)
@given(polynomials, polynomials, st.integers(-5, 5))
def test_restored_functions_are_homogeneous_and_come_back(above: dict, below: dict, dimension: int) -> None:
    ring, full = MIXED.internal_ring, MIXED.full_ring
    value = ring.fraction(ring.polynomial(above), ring.polynomial(below))
    restored = restore_unit(value, dimension, MIXED)
    assert restored.ring is full
    assert restored == full.fraction(restored.numerator, restored.denominator)  # reduced, sign fixed
    assert set_unit(restored, MIXED) == value
    weights = {"d": 0, **{v.name: v.dimension for v in MIXED.invariants}}
    assert dimension_of(restored, weights) == dimension
    # the definition: v -> v / m^dim(v), times m^dimension
    m = full.variable("m")
    images = {name: full.variable(name) / m ** weights[name] for name in ring.names}
    assert restored == value.substitute(images) * m**dimension


def test_zero_and_families_without_unit() -> None:
    assert restore_unit(MIXED.internal_ring.zero, 7, MIXED).is_zero()
    text = '[momenta]\nloop=["k"]\n[kinematics]\n[[line]]\nmomentum="k"'
    bare = read_family(text, "v.toml", "v")
    value = parse_rational("d-4", bare.internal_ring)
    assert restore_unit(value, 0, bare) == set_unit(value, bare) == value
    with pytest.raises(InputError, match="no unit"):
        restore_unit(value, 2, bare)


@settings(max_examples=30, deadline=None)
@given(st.lists(st.integers(-2, 3), min_size=2, max_size=2))
def test_scaling_of_the_integrand_gives_the_dimension(powers: list[int]) -> None:
    """Scaling all momenta by 2 scales the integrand by 2 to (dimension - L d)."""
    bubble = family("s = 2", "s")
    assume(any(powers))
    constant, slope = integral_dimension(bubble, powers)
    k2, kp, p2 = Fraction(3), Fraction(-5), Fraction(11)

    def integrand(scale: int) -> Fraction:
        result = Fraction(1)
        for line, power in zip(bubble.lines, powers, strict=True):
            d = line.quadratic[0][0] * k2 + line.linear[0][0] * kp
            d += line.constant.substitute({"s": p2}).to_fraction()
            result /= (d * scale**2) ** power
        return result

    assert integrand(2) / integrand(1) == Fraction(2) ** (constant - bubble.dimension)
    assert slope == -2
