"""The double cover of the line on which one square root becomes rational.

A root with two branch points is removed by a rational parametrisation of the conic
``y^2 = (x - a)(x - b)``: with ``x = a + (a - b)(1 - w)^2/(4 w)`` the root is
``(a - b)(1 - w^2)/(4 w)``; w = 1, -1, 0 are the points x = a, b and infinity, and x > a (a > b) is covered
by 0 < w < 1. A root with branch points a and infinity is removed by ``x = a + w^2``.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

from ibpred.epsform.form import Connection, Matrix
from ibpred.epsform.tags import Tag
from ibpred.errors import InputError
from ibpred.exact.rational import Rational, Ring, ring


@dataclass(frozen=True)
class Cover:
    """A system pulled back to a double cover.

    Attributes
    ----------
    connection
        The system in the new ratio w.
    substitution
        x as a function of w, in the ring of the new connection.
    ratio
        The old ratio x.
    branch_points
        The two points that were branch points; None for infinity.
    """

    connection: Connection
    substitution: Rational
    ratio: str
    branch_points: tuple[Fraction | None, ...]


def new_ratio(names: tuple[str, ...]) -> str:
    """``w``, ``w2``, ``w3``, ...: the first that is not taken."""
    name, number = "w", 2
    while name in names:
        name, number = f"w{number}", number + 1
    return name


def branch_points(tag: Tag, name: str) -> tuple[Fraction | None, ...] | None:
    """Where the square root of a product branches; None where some branch point is not rational."""
    points: list[Fraction | None] = []
    for factor in tag:
        slope = factor.derivative(name)
        if not slope.is_constant():
            return None
        points.append(-(factor.substitute({name: 0}) / slope).to_fraction())
    if len(points) % 2:
        points.append(None)
    return tuple(points)


def parametrisation(points: tuple[Fraction | None, ...], target: Ring, name: str) -> Rational:
    """x as a function of w for two branch points (None for infinity).

    Raises
    ------
    InputError
        If there are not two different points.
    """
    finite = sorted((p for p in points if p is not None), reverse=True)
    if len(points) != 2 or len(set(points)) != 2:
        raise InputError(f"a square root with a rational parametrisation has two branch points, not {points}")
    w = target.variable(name)
    if len(finite) == 1:
        return w * w + finite[0]
    a, b = finite
    return (1 - w) ** 2 / w * ((a - b) / 4) + a


def pulled_back(matrix: Matrix, name: str, substitution: Rational, new: str) -> Matrix:
    """``A(x(w)) dx/dw``."""
    slope = substitution.derivative(new)
    return tuple(
        tuple(
            entry.substitute({name: substitution}) * slope if entry else substitution.ring.zero
            for entry in row
        )
        for row in matrix
    )


def double_cover(connection: Connection, points: tuple[Fraction | None, ...]) -> Cover:
    """Pull a system in one ratio back to the double cover with the given branch points.

    Raises
    ------
    InputError
        If there are not two different points, or not one ratio.
    """
    if len(connection.variables) != 1:
        raise InputError("a double cover is taken of systems in one ratio")
    name = connection.variables[0]
    new = new_ratio(connection.ring.names)
    target = ring(new if n == name else n for n in connection.ring.names)
    substitution = parametrisation(points, target, new)
    matrix = pulled_back(connection.matrices[name], name, substitution, new)
    whole = Connection((new,), target, {new: matrix}, connection.blocks, connection.labels)
    return Cover(whole, substitution, name, points)


def describe(points: tuple[Fraction | None, ...], name: str) -> str:
    """What the branch points mean, for messages."""
    if len(points) != 2:
        return (
            f"the root has {len(points)} branch points, so its double cover is no rational curve and no "
            "rational change of variable removes it"
        )
    target = ring(("w",))
    return f"{name} = {parametrisation(points, target, 'w').factored_text()} makes the root rational"
