"""Conditions where the ratio of a region of scattering tends to minus infinity.

Inside a Euclidean region both directions to infinity are one sheet. In a region of scattering a letter closes
the positive axis, and minus infinity is reached through the upper half plane: with the ratio reflected it is
a plain transport to infinity, after half a turn about zero.
"""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction

from ibpred.boundary.conditions.conditions import EdgeView, view_from
from ibpred.boundary.conditions.edges import edges_at
from ibpred.boundary.conditions.sources import Master
from ibpred.epsform.form import EpsilonForm
from ibpred.iterated.constants.constants import Constant
from ibpred.iterated.constants.matrices import MatrixSeries, exponential
from ibpred.iterated.transport import INFINITY, residue_at


def reflected_view(form: EpsilonForm, masters: tuple[Master, ...]) -> EdgeView:
    """A form in one ratio and its masters with the ratio's sign changed."""
    (name,) = form.variables
    turned = {name: -form.ring.variable(name)}
    seen = tuple(
        replace(
            m,
            closed=None if m.closed is None else m.closed.substituted(turned),
            behaviours={} if m.at_infinity is None else {INFINITY: m.at_infinity},
        )
        for m in masters
    )
    other = replace(
        form,
        letters=tuple(letter.substitute(turned) for letter in form.letters),
        inverse=tuple(tuple(entry.substitute(turned) for entry in row) for row in form.inverse),
    )
    return view_from(edges_at(other, (name,))[0], other, seen, None)


def half_turn(view: EdgeView, order: int) -> MatrixSeries:
    """From the boundary vector of a ratio to that of the reflected one, through the upper half plane."""
    turn = Constant.generator("I") * Constant.generator("pi")
    return exponential(residue_at(view.edge.residues, Fraction(0)), turn, order)
