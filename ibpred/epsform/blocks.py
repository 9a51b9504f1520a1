"""Records of the diagonal: a block brought to its epsilon-form, or the finding that it has none."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction

from ibpred.epsform.form import Matrix
from ibpred.epsform.matrices import Constants
from ibpred.epsform.roots.tags import Tag
from ibpred.exact.rational import Rational


@dataclass(frozen=True, order=True)
class Exponent:
    """Local exponents ``a + b eps``.

    Attributes
    ----------
    shift
        a.
    slopes
        Coefficients, lowest first, of the monic polynomial over Q whose roots are the b: ``(-b, 1)`` for a
        single rational b, of higher degree for b that are conjugate over Q.
    """

    shift: Fraction
    slopes: tuple[Fraction, ...]

    @property
    def count(self) -> int:
        """How many exponents these are."""
        return len(self.slopes) - 1


@dataclass(frozen=True)
class Block:
    """A diagonal block in epsilon-form: ``I = T D f``, ``f' = eps (sum_l R_l dlog(letter_l)/dx + odd) f``.

    D is diagonal with the entries ``1/sqrt(tag)``; the odd part connects functions with different tags.

    Attributes
    ----------
    transformation, inverse
        T and its inverse.
    residues
        R_l by the text of the letter; letters with a zero matrix are left out. They connect functions with
        equal tags.
    tags
        For each function the polynomials whose product is under its square root.
    """

    transformation: Matrix
    inverse: Matrix
    residues: Mapping[str, Constants]
    tags: tuple[Tag, ...]

    @property
    def rooted(self) -> bool:
        """Whether some function carries a square root."""
        return any(self.tags)


@dataclass(frozen=True)
class Finding:
    """Why a block has no epsilon-form.

    Attributes
    ----------
    reason
        A whole sentence with the point.
    exponents
        (singular point, local exponents) as text, as far as known.
    branch_points
        Where half-integer exponents call for a square root, in case that is the only reason: rational
        points, and None for infinity.
    variable
        The ratio in which these are points.
    common
        Letters at which all exponents are half-integers: a square root of them multiplies the whole block.
    roots
        Letters at which some exponents are half-integers, in case that is the only reason.
    """

    reason: str
    exponents: tuple[tuple[str, tuple[str, ...]], ...]
    branch_points: tuple[Fraction | None, ...] = ()
    variable: str = ""
    common: Tag = ()
    roots: Tag = ()


def linear(shift: Fraction, slope: Fraction) -> Exponent:
    """The exponent ``shift + slope eps``."""
    return Exponent(shift, (-slope, Fraction(1)))


def split_exponent(value: Rational) -> tuple[Fraction, Fraction] | None:
    """(a, b) where the element is ``a + b eps``, None otherwise."""
    if not value.is_polynomial():
        return None
    scale = int(value.denominator.leading_coefficient())
    index = value.ring.index("eps")
    found = {0: Fraction(0), 1: Fraction(0)}
    for exponents, coefficient in value.numerator.to_dict().items():
        power = int(exponents[index])
        if power > 1 or sum(map(int, exponents)) != power:
            return None
        found[power] = Fraction(int(coefficient), scale)
    return found[0], found[1]


def slope_condition(slopes: Sequence[Fraction]) -> str:
    """The equation for conjugate slopes as text, e.g. ``b^2+b-1 = 0``."""
    text = ""
    for power in range(len(slopes) - 1, -1, -1):
        value = slopes[power]
        if not value:
            continue
        symbol = "" if power == 0 else "b" if power == 1 else f"b^{power}"
        size = str(abs(value)) if abs(value) != 1 or not symbol else ""
        sign = "-" if value < 0 else "+" if text else ""
        text += sign + "*".join(part for part in (size, symbol) if part)
    return f"{text} = 0"


def exponent_text(exponent: Exponent) -> str:
    """Text such as ``-1+2*eps``, or ``-1+b*eps with b^2-2 = 0``."""
    a, b = exponent.shift, -exponent.slopes[0]
    if exponent.count > 1:
        condition = slope_condition(exponent.slopes)
        return f"{a}+b*eps with {condition}" if a else f"b*eps with {condition}"
    if not b:
        return str(a)
    slope = "eps" if b == 1 else "-eps" if b == -1 else f"{b}*eps"
    if not a:
        return slope
    return f"{a}{slope}" if b < 0 else f"{a}+{slope}"


def irregular(point: str) -> str:
    """The sentence for an irregular singular point."""
    return (
        f"the point {point} is an irregular singularity (no change of basis lowers the pole to order one), "
        "so the solutions have an essential singularity there and no epsilon-form exists"
    )


def fractional(exponent: Fraction, point: str) -> str:
    """The sentence for an exponent that is no integer at eps = 0."""
    root = "a square root" if exponent.denominator == 2 else f"a root of order {exponent.denominator}"
    return f"exponent {exponent} at {point}: {root} is needed, which rational functions do not offer"


def moving(point: str) -> str:
    """The sentence for a true singularity whose place depends on eps."""
    return f"the point {point} depends on eps and is a true singularity, so no epsilon-form exists"


def no_exponent(exponents: str, point: str) -> str:
    """The sentence for exponents that are not linear in eps with rational coefficients."""
    return f"the exponents at {point} are not of the form a + b*eps with rational a and b: {exponents}"


def conjugate(point: str) -> str:
    """The sentence for residues that differ between conjugate points."""
    return (
        f"the roots of {point} have different residues, so an odd letter with the square root of its "
        "discriminant is needed: such letters are not supported yet"
    )


def not_fuchsian_root(point: str) -> str:
    """The sentence for a coupling between functions with different roots whose pole cannot be lowered."""
    return (
        f"the coupling between functions with different square roots has a pole at {point} that no change "
        "of basis lowers to order one"
    )
