"""Square roots that mix ratios: conics and the search for variables, checked by substitution."""

from __future__ import annotations

import pytest

from ibpred.epsform.form import Connection
from ibpred.epsform.roots.conics import normalisations, parametrised, square_root, without_squares
from ibpred.epsform.roots.rationalise import positive_at_corner, rationalise
from ibpred.epsform.variables import root_variables
from ibpred.exact.grammar import parse_rational
from ibpred.exact.primes import first_primes
from ibpred.exact.rational import ring

PRIMES = first_primes(20)
KALLEN = "x^2-2*x*y+y^2+2*x+2*y+1"


def in_ring(names: str):
    field = ring(("eps", *names))
    return field, lambda text: parse_rational(text, field)


@pytest.mark.parametrize(
    "radicand",
    [KALLEN, "x*(x+4)", "x+y^2", "x^2*y^2+3*x+y", "4*x^2+y", "y^2+x*y+2*x^2", "(x-y)*(2*x+3*y)"],
)
def test_lines_through_a_point_make_the_root_rational(radicand: str) -> None:
    _, element = in_ring("xy")
    step = parametrised(element(radicand), "x", "w", [element("y"), element("x-y")])
    assert step is not None
    assert square_root(step.pulled(element(radicand))) is not None
    letters = [step.pulled(element(letter)) for letter in ("x", "y", radicand)]
    for other in normalisations(step, letters):
        assert square_root(other.pulled(element(radicand))) is not None


def test_no_rational_point_and_no_conic() -> None:
    _, element = in_ring("xy")
    assert parametrised(element("2*x^2+3*y^2+5"), "x", "w", []) is None
    assert parametrised(element("x^3+y"), "x", "w", []) is None


def test_square_roots_and_square_free_parts() -> None:
    _, element = in_ring("xy")
    root = square_root(element("9*(x-y)^2/(4*y^4)"))
    assert root in (element("3*(x-y)/(2*y^2)"), element("-3*(x-y)/(2*y^2)"))
    for text in ("-x^2", "2*x^2", "x*y^2"):
        assert square_root(element(text)) is None
    assert without_squares(element("-12*x^3*y^2/(x+y)")) == element("-3*x*(x+y)")


def test_positive_at_the_corner() -> None:
    _, element = in_ring("xy")
    # y is much smaller than x
    assert positive_at_corner(element("x-y"), ("x", "y"))
    assert not positive_at_corner(element("y-x"), ("x", "y"))
    assert positive_at_corner(element("(y-x)/(x-1)"), ("x", "y"))


@pytest.mark.parametrize(
    ("letters", "radicands"),
    [
        (("x", "y"), (KALLEN,)),
        (("x", "y"), ("x^2-2*x*y+y^2-2*x-2*y+1",)),
        # the box with a massive loop after s = (1-x)^2/x and t = (1-y)^2/y (up to signs)
        (("x", "y", "x+1", "y+1", "x-1", "y-1"), ("(1-x)^2*(1-y)^2+4*y*(1-x)^2+4*x*(1-y)^2",)),
    ],
)
def test_variables_with_linear_letters_are_found(letters, radicands) -> None:
    field, element = in_ring("xy")
    given = [element(radicand) for radicand in radicands]
    ratios = [field.variable("x"), field.variable("y")]
    change = rationalise(("x", "y"), [element(letter) for letter in letters], given, ratios)
    assert change is not None
    assert change.fit
    for radicand in given:
        for step in change.steps:
            radicand = step.pulled(radicand)
        assert square_root(radicand) is not None


def test_a_cubic_in_every_variable_is_left() -> None:
    _, element = in_ring("xy")
    given = [element("x^3+y^3+x+y+1")]
    assert rationalise(("x", "y"), [element("x")], given, [element("x"), element("y")]) is None


def diagonal_system(field, *letters: tuple[str, str]) -> Connection:
    """Functions of size one: ``f = letter^exponent`` each."""
    size = len(letters)
    matrices = {}
    for name in field.names[1:]:
        rows = [[field.zero] * size for _ in range(size)]
        for k, (letter, exponent) in enumerate(letters):
            value = parse_rational(letter, field)
            rows[k][k] = parse_rational(exponent, field) * value.derivative(name) / value
        matrices[name] = tuple(map(tuple, rows))
    labels = tuple(f"I{k + 1}" for k in range(size))
    return Connection(field.names[1:], field, matrices, (1,) * size, labels)


def test_variables_with_linear_letters_are_used() -> None:
    field, element = in_ring("xy")
    system = diagonal_system(field, ("x", "eps"), ("y", "-eps"), (KALLEN, "-1/2-eps"))
    found = root_variables(system, PRIMES, 1)
    assert found.offered is None
    assert found.used is not None
    assert found.used.linear
    assert found.used.radicands == (element(KALLEN),)
    images = dict(zip("xy", found.used.images, strict=True))
    assert square_root(element(KALLEN).substitute(images)) is not None


def test_variables_with_other_letters_are_offered_only() -> None:
    field, element = in_ring("xy")
    system = diagonal_system(field, ("x^5+y^5+x*y+1", "eps"), (KALLEN, "-1/2-eps"))
    found = root_variables(system, PRIMES, 1)
    assert found.used is None
    assert found.offered is not None
    assert not found.offered.linear
    images = dict(zip("xy", found.offered.images, strict=True))
    assert square_root(element(KALLEN).substitute(images)) is not None


def test_a_root_that_nothing_removes() -> None:
    """The root of Bhabha scattering's double box (Festi, van Straten, arXiv:1809.04970)."""
    field, _ = in_ring("xy")
    root = "(x+y)*(x*y+1)*(x^2*y+x*y^2-4*x*y+x+y)"
    found = root_variables(diagonal_system(field, ("x", "eps"), (root, "-1/2")), PRIMES, 1)
    assert found.used is None
    assert found.offered is None
