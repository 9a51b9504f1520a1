"""What stands behind a block without epsilon-form: its operator, factors, exponents and geometry."""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction

from ibpred.epsform.blocks import Finding
from ibpred.epsform.form import Connection, Obstruction
from ibpred.epsform.lattices.image import block_pattern
from ibpred.epsform.matrices import part, vanishes
from ibpred.epsform.obstructions.cyclic import Cyclic, annihilates, cyclic_function
from ibpred.epsform.obstructions.operators import (
    Operator,
    is_self_adjoint,
    maximal_points,
    operator,
    singular_points,
    symmetric_root,
)
from ibpred.epsform.obstructions.period_form import period_form
from ibpred.epsform.obstructions.picardfuchs import picard_fuchs
from ibpred.epsform.obstructions.right_factors import factors, is_irreducible
from ibpred.errors import UnfinishedError

SERIES_TERMS = 48
"""Terms of the power series of a period form."""

_LINE = 7  # the other ratios are 1/7, 1/8, ... where factors are looked for


def obstruction(
    connection: Connection, rows: tuple[int, ...], found: Finding, primes: Sequence[int], seed: int
) -> Obstruction:
    """All that is told about a block that has no epsilon-form.

    The operator is taken in the first ratio that the block depends on. Where it depends on others as well,
    its factors and their geometry are looked at on a line where these are fixed numbers.
    """
    own = {name: part(connection.matrices[name], rows, rows) for name in connection.variables}
    name = next((n for n in own if not vanishes(own[n])), connection.variables[0])
    cyclic: Cyclic | None = None
    if len(connection.variables) == 1 and len(rows) > 1:
        subject = f"block {', '.join(connection.labels[i] for i in rows)}"
        cyclic = cyclic_function(block_pattern(own[name], connection.ring, name), primes, seed, subject)
        if cyclic is not None and not annihilates(cyclic, own[name]):
            raise UnfinishedError(
                f"{subject}: its Picard-Fuchs operator fails the exact check; give more primes"
            )
    equation = picard_fuchs(own[name], name) if cyclic is None else cyclic.at_zero
    if equation is None:
        return Obstruction(rows, found.reason, None, found.exponents)
    line, where = _on_a_line(equation)
    parts = factors(line)
    form = None
    if cyclic is not None and len(parts) == 1:
        form = period_form(cyclic, SERIES_TERMS)
    return Obstruction(
        rows,
        found.reason,
        equation.text(),
        found.exponents,
        tuple(p.text() for p in parts),
        tuple((p.text(name), tuple(map(str, p.exponents))) for p in singular_points(line)),
        where + geometry(line, parts),
        form,
    )


def _on_a_line(equation: Operator) -> tuple[Operator, str]:
    """The operator where all other ratios are fixed numbers, and words that say so."""
    used = {variable for c in equation.coefficients for variable in c.variables()}
    others = [variable for variable in equation.ring.names if variable in used - {equation.name}]
    if not others:
        return equation, ""
    values = {variable: Fraction(1, _LINE + k) for k, variable in enumerate(others)}
    listed = ", ".join(f"{variable} = {value}" for variable, value in values.items())
    return operator([c.substitute(values) for c in equation.coefficients], equation.name), f"at {listed}: "


def geometry(equation: Operator, parts: Sequence[Operator]) -> str:
    """A sentence on what an operator points to."""
    if len(parts) > 1:
        orders = ", ".join(str(p.order) for p in parts)
        text = f"the operator has factors of order {orders} (left to right)"
        largest = max(parts, key=lambda p: p.order)
        return text if largest.order == 1 else f"{text}; the largest one: {_irreducible(largest)}"
    return _irreducible(equation)


def _irreducible(equation: Operator) -> str:
    order = equation.order
    if order == 1:
        return "an operator of order one, with an algebraic or exponential solution"
    kind = "irreducible" if is_irreducible(equation) else "no factor found,"
    kind = f"{kind} of order {_WORDS.get(order, order)}"
    points = ", ".join(p.text(equation.name) for p in maximal_points(equation))
    if not points:
        return f"{kind}, and no point of maximal unipotent monodromy: the geometry is not read off"
    where = f"with maximal unipotent monodromy at {points}"
    if order == 2:
        return f"{kind} {where}: an elliptic curve"
    if order == 3:
        root = symmetric_root(equation)
        if root is None:
            return f"{kind} {where}, but no symmetric square: no K3 surface"
        return (
            f"{kind} {where}, the symmetric square of {root.text()}: a K3 surface, of Picard number 19 as a "
            "rule"
        )
    if is_self_adjoint(equation):
        return f"{kind}, self-adjoint, {where}: a Calabi-Yau variety of dimension {order - 1}"
    return f"{kind}, not self-adjoint, {where}: not of Calabi-Yau type"


_WORDS = {2: "two", 3: "three", 4: "four", 5: "five", 6: "six"}
