"""What has to be computed, exactly and for all eps: the recursion down to Gamma functions as records."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction

from ibpred.boundary.behaviour.gamma import GammaForm
from ibpred.diffeq.system import SparseMatrix
from ibpred.exact.rational import Rational
from ibpred.family.definition import Powers


@dataclass(frozen=True)
class Part:
    """A closed form, or a value of an earlier node, times a factor.

    Attributes
    ----------
    factor
        In Q(d).
    form
        The closed form; None for a value.
    node, index
        Which value of which node; without meaning for a closed form.
    """

    factor: Rational
    form: GammaForm | None
    node: int = 0
    index: int = 0


Combination = tuple[Part, ...]
"""A sum; empty for zero."""

Row = tuple[tuple[int, Rational], ...]
"""(index of a master, coefficient in Q(d, eta)), no zero coefficients."""


@dataclass(frozen=True)
class Term:
    """What one region contributes in leading order: ``eta^(loops d/2 - power) jacobian^-d hard soft``."""

    loops: int
    power: int
    jacobian: Fraction
    hard: Combination
    soft: Combination


@dataclass(frozen=True)
class Condition:
    """The behaviour of one integral at large mass.

    Attributes
    ----------
    powers
        The integral.
    row
        In the masters of the flow.
    terms
        Its regions; those that vanish to all orders are left out.
    """

    powers: Powers
    row: Row
    terms: tuple[Term, ...]


@dataclass(frozen=True)
class Flow:
    """Values that flow from infinite to zero auxiliary mass.

    Attributes
    ----------
    family
        Name of the family, for messages.
    line, place
        Text and index of the line with the mass.
    dimension
        d0.
    masters
        Masters of the family with the mass.
    matrix
        ``dI/d eta = matrix I`` over Q(d, eta).
    conditions
        Determine the solution at large eta.
    targets
        The values: integrals in the masters, at eta = 0.
    """

    family: str
    line: str
    place: int
    dimension: int
    masters: tuple[Powers, ...]
    matrix: SparseMatrix
    conditions: tuple[Condition, ...]
    targets: tuple[Row, ...]


@dataclass(frozen=True)
class Straightening:
    """Values of integrals with linear lines, from those with curved ones.

    Attributes
    ----------
    family
        Name of the family, for messages.
    dimension
        d0.
    masters
        Masters of the family with curved lines.
    matrix
        ``dI/dr = matrix I`` over Q(d, r).
    start
        The value of r where the masters are known; all singular points are nearer to zero.
    known
        The masters there.
    targets
        The values: integrals in the masters, at infinite r.
    """

    family: str
    dimension: int
    masters: tuple[Powers, ...]
    matrix: SparseMatrix
    start: Fraction
    known: tuple[Combination, ...]
    targets: tuple[Row, ...]


@dataclass(frozen=True)
class Node:
    """Values: the targets of a flow or of a straightening, or else combinations of what is known earlier."""

    flow: Flow | None = None
    straightening: Straightening | None = None
    values: tuple[Combination, ...] = ()


@dataclass(frozen=True)
class AuxiliaryPlan:
    """A plan for the integrals of a family at a point.

    Attributes
    ----------
    family
        Name of the family.
    dimension
        d0.
    loops
        L: the integrals have poles of order at most 2 L in eps.
    point
        The invariants.
    wanted
        The integrals.
    nodes
        Each refers to earlier ones only.
    values
        The wanted integrals in values of the nodes.
    """

    family: str
    dimension: int
    loops: int
    point: Mapping[str, Fraction]
    wanted: tuple[Powers, ...]
    nodes: tuple[Node, ...]
    values: tuple[Combination, ...]
