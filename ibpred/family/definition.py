"""The record of an integral family: loop momenta, kinematics, lines.

Conventions: d = d0 - 2 eps; a line with momentum q and squared mass m2 is D = m2 - q^2; the measure is
``exp(L eps gamma_E) prod_l d^d k_l / (i pi^(d/2))``.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

from ibpred.exact.rational import Rational, Ring, ring

Powers = tuple[int, ...]
"""Powers of the lines in file order (auxiliary numerators last); negative powers are numerators."""


@dataclass(frozen=True)
class Invariant:
    """A kinematic invariant or squared mass, with its mass dimension."""

    name: str
    dimension: int


@dataclass(frozen=True)
class Line:
    """A line as a polynomial of degree two in the loop momenta.

    ``D = sum_ij quadratic[i][j] k_i.k_j + sum_ie linear[i][e] k_i.p_e + constant``

    Attributes
    ----------
    text
        The momentum or expression as the user wrote it (made up for automatic numerators).
    momentum
        Coefficients of q over (loop momenta, external momenta) for a line ``m2 - q^2``; None for a
        line given by an expression.
    quadratic
        Symmetric L x L matrix.
    linear
        L x E matrix.
    constant
        Rest of D, with external products replaced by invariants; in the family's kinematic ring.
    mass2
        Squared mass of a line given by momentum, zero otherwise; in the kinematic ring.
    cut
        Integrals without this line vanish.
    numerator
        The power is never positive (an irreducible numerator, given or completed automatically).
    dimension
        Mass dimension of D: 2 unless the line is given by an expression that is linear in momenta.
    """

    text: str
    momentum: tuple[Fraction, ...] | None
    quadratic: tuple[tuple[Fraction, ...], ...]
    linear: tuple[tuple[Fraction, ...], ...]
    constant: Rational
    mass2: Rational
    cut: bool
    numerator: bool
    dimension: int = 2


@dataclass(frozen=True)
class Graph:
    """A Feynman graph: edges in line order, external momenta by vertex.

    Attributes
    ----------
    edges
        (vertex, vertex) of each line that is no numerator, in line order.
    legs
        (external momentum name, vertex); the dependent leg is not listed.
    rest
        Vertex where the dependent leg takes out the sum of the others; None without legs.
    """

    edges: tuple[tuple[int, int], ...]
    legs: tuple[tuple[str, int], ...]
    rest: int | None = None


@dataclass(frozen=True)
class Crossing:
    """A substitution of the external momenta that can be undone by substituting the invariants.

    Attributes
    ----------
    name
        As in the file.
    momenta
        E x E: ``p_e -> sum_f momenta[e][f] p_f``.
    invariants
        For each invariant of the family, in its order, what it becomes; in the kinematic ring.
    """

    name: str
    momenta: tuple[tuple[Fraction, ...], ...]
    invariants: tuple[Rational, ...]


@dataclass(frozen=True)
class VariableChange:
    """A dimensionless variable that stands for an invariant.

    Attributes
    ----------
    name
        The variable.
    invariant
        The invariant that it replaces.
    value
        The invariant in terms of the variables and of the invariants that stay.
    text
        The same as the user wrote it.
    """

    name: str
    invariant: str
    value: Rational
    text: str


@dataclass(frozen=True)
class FamilyDefinition:
    """An integral family, complete: every scalar product of a loop momentum is a combination of lines.

    Attributes
    ----------
    name
        The file's stem.
    title
        Free text.
    loops, external
        Names of the loop momenta and of the independent external momenta (all incoming).
    invariants
        Invariants and squared masses in file order.
    unit
        The invariant that is set to one inside; None where the family has no invariant.
    dimension
        d0 in d = d0 - 2 eps.
    gram
        E x E matrix of the products p_i.p_j in the kinematic ring.
    lines
        L(L+1)/2 + L E lines, numerators last if they were completed automatically.
    graph
        The graph, as given or recognised from the momenta of the lines; None where there is none.
    crossings
        Crossings under which the family's integrals are wanted too.
    variables
        Variables in which the user wants the epsilon-form and all that follows.
    region
        Signs of invariants, +1 or -1, where the user wants the family solved; see
        `ibpred.family.signs.region_signs`.
    """

    name: str
    title: str
    loops: tuple[str, ...]
    external: tuple[str, ...]
    invariants: tuple[Invariant, ...]
    unit: str | None
    dimension: int
    gram: tuple[tuple[Rational, ...], ...]
    lines: tuple[Line, ...]
    graph: Graph | None
    crossings: tuple[Crossing, ...] = ()
    variables: tuple[VariableChange, ...] = ()
    region: tuple[tuple[str, int], ...] = ()

    @property
    def kinematic_ring(self) -> Ring:
        """Q(invariants), in file order."""
        return ring(invariant.name for invariant in self.invariants)

    @property
    def full_ring(self) -> Ring:
        """Q(d, invariants)."""
        return ring(("d", *(invariant.name for invariant in self.invariants)))

    @property
    def internal_ring(self) -> Ring:
        """Q(d, invariants but the unit): what the engine works in, the unit set to one."""
        return ring(("d", *(i.name for i in self.invariants if i.name != self.unit)))

    @property
    def propagators(self) -> tuple[int, ...]:
        """Indices of the lines that are no numerators."""
        return tuple(i for i, line in enumerate(self.lines) if not line.numerator)
