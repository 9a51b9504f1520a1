"""Boundary constants of a region of scattering from those of the Euclidean region, by half turns.

Near a corner ``f ~ prod_j x_j^(eps A_j) c`` with commuting A_j, and nothing lies in between when ratios turn
about zero. A ratio ``exp(i pi h_j) x_j`` brings the factor ``exp(i pi h_j eps A_j)``, the unit
``exp(i pi h)`` the factor ``exp(i pi h B eps)`` of integrals of mass dimension A + B eps.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from fractions import Fraction

from ibpred.boundary.conditions.edges import edges_at
from ibpred.boundary.conditions.fix import Boundary
from ibpred.epsform.form import EpsilonForm
from ibpred.errors import BoundaryError
from ibpred.exact.rational import Rational
from ibpred.family.definition import FamilyDefinition, Powers
from ibpred.family.units import unit_exponent
from ibpred.iterated.constants.constants import ZERO, Constant
from ibpred.iterated.constants.matrices import (
    UNIT,
    MatrixSeries,
    RationalMatrix,
    exponential,
    identity,
    rational_matrix,
)


def continued(
    boundary: Boundary,
    form: EpsilonForm,
    target: EpsilonForm,
    family: FamilyDefinition,
    masters: Sequence[Powers],
    usual: Mapping[str, int],
    here: Mapping[str, int],
) -> Boundary:
    """The constants of a form in a region that half turns of unit and ratios lead to.

    Parameters
    ----------
    boundary, form
        The constants of the Euclidean region, and the form that they belong to.
    target
        A form in the ratios of the region, of the same names.
    family, masters
        The family, and the powers of its masters.
    usual, here
        Signs of the invariants in the Euclidean region and in the other one.

    Raises
    ------
    BoundaryError
        If the two forms are not a constant matrix apart, or the mass dimensions of the masters do not fit.
    """
    turns, unit_turns = _half_turns(family, form.variables, usual, here)
    dimensions = [unit_exponent(family, powers) for powers in masters]
    slopes = {b for _, b in dimensions}
    if len(slopes) != 1 or any(a.denominator != 1 for a, _ in dimensions):
        raise BoundaryError("the masters differ by no integer power of the unit")
    size, order = len(form.inverse), len(boundary.constants) - 1
    half_turn = Constant.generator("I") * Constant.generator("pi")
    edge = edges_at(form, boundary.corner)[0]
    residues = dict(zip(edge.scales, edge.scale_residues, strict=True))
    residues[edge.variable] = edge.residues[Fraction(0)]
    total = exponential(identity(size), half_turn * (slopes.pop() * unit_turns), order)
    for name, residue in residues.items():
        total = exponential(residue, half_turn * turns[name], order) @ total
    change = _change(form, target, turns, [int(a) * unit_turns for a, _ in dimensions])
    total = MatrixSeries(({UNIT: change}, *({} for _ in range(order)))) @ total
    return replace(boundary, constants=_applied(total, boundary.constants))


def _half_turns(
    family: FamilyDefinition, ratios: Sequence[str], usual: Mapping[str, int], here: Mapping[str, int]
) -> tuple[dict[str, int], int]:
    """Those of the ratios and of the unit: the Euclidean are ``exp(i pi h)`` times those of the region."""
    sizes = {invariant.name: invariant.dimension for invariant in family.invariants}
    # F - i0 is kept where an invariant of the other sign has the phase -pi
    phases = {name: 0 if here[name] == sign else -1 for name, sign in usual.items()}
    if family.unit is None:
        return dict(zip(ratios, phases.values(), strict=True)), 0
    unit = phases.pop(family.unit)
    turns = [phase - sizes[name] // sizes[family.unit] * unit for name, phase in phases.items()]
    return dict(zip(ratios, turns, strict=True)), unit


def _change(
    form: EpsilonForm, target: EpsilonForm, turns: Mapping[str, int], unit: Sequence[int]
) -> RationalMatrix:
    """``target^-1 T`` with the ratios turned, a constant matrix."""
    images = {name: form.ring.variable(name) * (-1) ** abs(turns[name]) for name in form.variables}
    turned = [
        [entry.substitute(images) * (-1) ** abs(power) for entry in row]
        for row, power in zip(form.transformation, unit, strict=True)
    ]
    found = []
    for line in target.inverse:
        row = []
        for j in range(len(turned)):
            terms = [(e, turned[k][j]) for k, e in enumerate(line) if e and turned[k][j]]
            value: Rational = sum((a * b for a, b in terms), form.ring.zero)
            if not value.is_constant():
                raise BoundaryError(
                    "the epsilon-forms of the region and of the Euclidean one are no constant matrix apart"
                )
            row.append(value.to_fraction())
        found.append(row)
    return rational_matrix(found)


def _applied(series: MatrixSeries, vectors: Sequence[Sequence[Constant]]) -> tuple[tuple[Constant, ...], ...]:
    """A matrix series times a vector series."""
    size = len(vectors[0])
    found = []
    for k in range(len(vectors)):
        vector = [ZERO] * size
        for j in range(k + 1):
            for monomial, matrix in series.orders[j].items():
                factor = Constant.from_terms({monomial: Fraction(1)})
                seen = [value * factor for value in vectors[k - j]]
                for place, entry in enumerate(matrix.entries()):
                    if entry != 0 and seen[place % size]:
                        number = Fraction(int(entry.p), int(entry.q))
                        vector[place // size] = vector[place // size] + seen[place % size] * number
        found.append(tuple(vector))
    return tuple(found)
