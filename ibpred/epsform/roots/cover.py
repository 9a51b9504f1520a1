"""The double cover of the line on which one square root becomes rational.

A root with two branch points is removed by a rational parametrisation of the conic
``y^2 = (x - a)(x - b)``: with ``x = a + (a - b)(1 - w)^2/(4 w)`` the root is
``(a - b)(1 - w^2)/(4 w)``; w = 1, -1, 0 are the points x = a, b and infinity, and x > a (a > b) is covered
by 0 < w < 1. A root with branch points a and infinity is removed by ``x = a + w^2``.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

from ibpred.epsform.form import Connection
from ibpred.epsform.matrices import added, scaled
from ibpred.epsform.roots.tags import Tag
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
    ratio, new
        The old ratio x and the new one w.
    branch_points
        The two points that were branch points; None for infinity.
    needed
        Whether a coupled block has no epsilon-form without it.
    """

    connection: Connection
    substitution: Rational
    ratio: str
    new: str
    branch_points: tuple[Fraction | None, ...]
    needed: bool


def new_ratio(names: tuple[str, ...]) -> str:
    """``w``, ``w2``, ``w3``, ...: the first that is not taken."""
    name, number = "w", 2
    while name in names:
        name, number = f"w{number}", number + 1
    return name


def branch_points(tag: Tag) -> tuple[str, tuple[Fraction | None, ...]] | None:
    """The ratio on which a square root depends, and where it branches.

    None where it depends on several ratios, or a branch point is not rational.
    """
    names = {name for factor in tag for name in factor.variables()}
    if len(names) != 1:
        return None
    (name,) = names
    points: list[Fraction | None] = []
    for factor in tag:
        slope = factor.derivative(name)
        if not slope.is_constant():
            return None
        points.append(-(factor.substitute({name: 0}) / slope).to_fraction())
    if len(points) % 2:
        points.append(None)
    return name, tuple(points)


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


def double_cover(
    connection: Connection, name: str, points: tuple[Fraction | None, ...], needed: bool = False
) -> Cover:
    """Pull a system back to the double cover of one of its ratios with the given branch points.

    Parameters
    ----------
    connection
        The system.
    name
        The ratio.
    points
        Its two branch points; None for infinity.
    needed
        See `Cover`.

    Raises
    ------
    InputError
        If there are not two different points.
    """
    new = new_ratio(connection.ring.names)
    target = ring(new if n == name else n for n in connection.ring.names)
    substitution = parametrisation(points, target, new)
    whole = pulled_back(connection, name, new, substitution)
    return Cover(whole, substitution, name, new, points, needed)


def pulled_back(connection: Connection, old: str, new: str, value: Rational) -> Connection:
    """A system in which one ratio is expressed by a new one and the others.

    Parameters
    ----------
    connection
        The system.
    old, new
        The ratio that goes and the one that comes in its place.
    value
        The old one, in the ring with the new one in its place.
    """
    target = value.ring
    moved = {
        variable: tuple(
            tuple(e.substitute({old: value}) if e else target.zero for e in row) for row in matrix
        )
        for variable, matrix in connection.matrices.items()
    }
    matrices = {new: scaled(moved[old], value.derivative(new))}
    for variable, matrix in moved.items():
        slope = value.derivative(variable) if variable != old else target.zero
        if variable != old:
            matrices[variable] = added(matrix, scaled(moved[old], slope)) if slope else matrix
    variables = tuple(new if v == old else v for v in connection.variables)
    ordered = {variable: matrices[variable] for variable in variables}
    return Connection(variables, target, ordered, connection.blocks, connection.labels)


def describe(points: tuple[Fraction | None, ...], name: str) -> str:
    """What the branch points mean, for messages."""
    if len(points) != 2:
        return (
            f"the root has {len(points)} branch points, so its double cover is no rational curve and no "
            "rational change of variable removes it"
        )
    target = ring(("w",))
    return f"{name} = {parametrisation(points, target, 'w').factored_text()} makes the root rational"
