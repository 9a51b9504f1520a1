"""The [[line]] sections of a family file."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction

from ibpred.errors import ExpressionError
from ibpred.exact.rational import Rational
from ibpred.family.definition import Line
from ibpred.family.kinematics import dimension_of, dimension_text, dimensions_in
from ibpred.family.lines import RowSpace, Space, line_from_form, product_row, square_line
from ibpred.family.momenta import Form, parse_form, parse_scalar
from ibpred.family.source import Path, Source


def read_lines(
    source: Source, space: Space, dimensions: Mapping[str, int], *, only_numerators: bool
) -> tuple[Line, ...]:
    """The lines of the [[line]] sections.

    Parameters
    ----------
    dimensions
        Mass dimensions of all momenta and invariants.
    only_numerators
        Whether the propagators come from a graph, so that a line must be a numerator.

    Raises
    ------
    FamilyFileError
        At the first line that is wrong.
    """
    lines = []
    for i in range(len(source.data.get("line", ()))):
        line = _read_line(source, ("line", i), space, dimensions)
        if only_numerators and not line.numerator:
            raise source.error(
                "beside a graph a line can only be a numerator: add numerator = true, or make it an edge",
                ("line", i),
            )
        lines.append(line)
    return tuple(lines)


def _read_line(source: Source, path: Path, space: Space, dimensions: Mapping[str, int]) -> Line:
    momentum = source.string((*path, "momentum"))
    expression = source.string((*path, "expression"))
    cut, numerator = source.flag((*path, "cut")), source.flag((*path, "numerator"))
    if cut and numerator:
        raise source.error("a numerator cannot be cut", (*path, "cut"))
    if momentum is not None and expression is not None:
        raise source.error("a line has a momentum or an expression, not both", (*path, "expression"))
    if momentum is not None:
        q = _read_momentum(source, (*path, "momentum"), momentum, space)
        mass2 = read_mass2(source, (*path, "mass2"), space, dimensions)
        return square_line(q, mass2, space, text=momentum, cut=cut, numerator=numerator)
    if expression is None:
        raise source.error('a line needs a momentum, e.g. momentum = "k+p", or an expression', path)
    if source.string((*path, "mass2")) is not None:
        raise source.error("write the mass into the expression; mass2 goes with a momentum", (*path, "mass2"))
    form, dimension = _read_expression(source, (*path, "expression"), expression, space, dimensions)
    return line_from_form(
        form,
        space,
        text=expression,
        momentum=None,
        mass2=space.momenta.ring.zero,
        dimension=dimension,
        cut=cut,
        numerator=numerator,
    )


def read_mass2(source: Source, path: Path, space: Space, dimensions: Mapping[str, int]) -> Rational:
    """A squared mass, zero where the entry is missing.

    Raises
    ------
    FamilyFileError
        Unless it is a polynomial in the invariants of mass dimension 2.
    """
    text = source.string(path)
    if text is None:
        return space.momenta.ring.zero
    try:
        form = parse_form(text, space.momenta)
    except ExpressionError as error:
        raise source.expression_error(error, path) from None
    value = form.coefficient()
    if not form.is_number() or not value.is_polynomial():
        raise source.error("mass2 must be a polynomial in the invariants", path)
    if value and dimension_of(value, dimensions) != 2:
        found = dimension_of(value, dimensions)
        has = "terms of several mass dimensions" if found is None else f"mass dimension {found}"
        raise source.error(f"mass2 must have mass dimension 2, {text} has {has}", path)
    return value


def _read_momentum(source: Source, path: Path, text: str, space: Space) -> tuple[Fraction, ...]:
    try:
        form = parse_form(text, space.momenta)
    except ExpressionError as error:
        raise source.expression_error(error, path) from None
    if form.terms and not form.is_vector():
        raise source.error("a momentum is a sum of momenta; this is a scalar (use expression)", path)
    if not all(value.is_constant() for value in form.terms.values()):
        raise source.error("the coefficients of a momentum must be numbers (use expression)", path)
    if not any(form.coefficient(k) for k in space.loops):
        raise source.error(f"the line has no loop momentum; those are {', '.join(space.loops)}", path)
    for name, dimension in zip(space.external, space.dimensions, strict=True):
        if dimension != 1 and form.coefficient(name):
            raise source.error(
                f"wrong mass dimension: {name} has {dimension}, a loop momentum has 1 (use expression)", path
            )
    return tuple(form.coefficient(name).to_fraction() for name in (*space.loops, *space.external))


def _read_expression(
    source: Source, path: Path, text: str, space: Space, dimensions: Mapping[str, int]
) -> tuple[Form, int]:
    """The form of a line, and its mass dimension."""
    try:
        form = parse_scalar(text, space.momenta)
    except ExpressionError as error:
        raise source.expression_error(error, path) from None
    loops = set(space.loops)
    inside = {term: value for term, value in form.terms.items() if loops & set(term)}
    if not inside:
        raise source.error(f"the line has no loop momentum; those are {', '.join(space.loops)}", path)
    for term, value in inside.items():
        if not value.is_constant():
            raise source.error(f"the coefficient of {'*'.join(term)} must be a number, not {value}", path)
    found = dimensions_in(form, dimensions)
    dimension = next(iter(found.values()))
    if dimension is None or len(set(found.values())) > 1:
        raise source.error(f"wrong mass dimension: {dimension_text(found)}", path)
    return form, dimension


def check_independent(source: Source, lines: Sequence[Line], space: Space, *, edges: int) -> None:
    """Make sure that no line is a combination of the lines before it and of invariants.

    Parameters
    ----------
    edges
        How many of the lines, the first ones, are edges of the graph.

    Raises
    ------
    FamilyFileError
        Naming the relation.
    """
    known = RowSpace()
    for i, line in enumerate(lines):
        relation = known.add(product_row(line))
        if relation is None:
            continue
        rest = line.constant
        for j, value in relation.items():
            rest = rest - lines[j].constant * value
        terms = [f"{_factor(value)}D{j + 1}" for j, value in relation.items()]
        if rest or not terms:
            terms.append(f"({rest})")
        problem = (
            f"line {i + 1} ({line.text}) depends on the lines before it: "
            f"D{i + 1} = {' + '.join(terms).replace('+ -', '- ')}"
        )
        if len(lines) > space.products:
            problem += f"; {len(lines)} lines are too many for {space.products} products with loop momenta"
        problem += "; leave it out, or split the integrals by partial fractions into several families"
        key = "expression" if line.momentum is None else "momentum"
        raise source.error(problem, ("edge", i) if i < edges else ("line", i - edges, key))


def _factor(value: Fraction) -> str:
    if abs(value) == 1:
        return "" if value > 0 else "-"
    return f"{value}*"
