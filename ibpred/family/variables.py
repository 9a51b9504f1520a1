"""The section [variables]: dimensionless variables in place of invariants, ``x = "s = -m2*(1-x)^2/x"``."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from ibpred.errors import ExpressionError
from ibpred.exact.grammar import nearest, parse_rational
from ibpred.exact.rational import Rational, ring
from ibpred.family.definition import VariableChange
from ibpred.family.source import Path, Source


def read_variables(
    source: Source, invariants: Mapping[str, int], unit: str | None
) -> tuple[VariableChange, ...]:
    """Read the section; no changes where it is missing.

    Parameters
    ----------
    source
        The family file.
    invariants
        Mass dimensions of the invariants.
    unit
        The invariant that is set to one inside.

    Raises
    ------
    FamilyFileError
        If an entry is no equation for an invariant in terms of the new variables and the invariants that
        stay, or has the wrong mass dimension.
    """
    section = source.data.get("variables", {})
    if not isinstance(section, dict):
        raise source.error("[variables] must be a table", ("variables",))
    names = tuple(section)
    replaced: dict[str, str] = {}
    for name in names:
        path: Path = ("variables", name)
        text = source.string(path) or ""
        left, equals, _ = text.partition("=")
        if not equals:
            raise source.error(f"write an equation for an invariant, e.g. s = -m2*(1-{name})^2/{name}", path)
        invariant = left.strip()
        if invariant not in invariants:
            hint = nearest(invariant, tuple(invariants))
            raise source.error(f"{invariant!r} is no invariant; {hint}", path)
        if invariant == unit:
            raise source.error(f"{invariant} is the unit; choose another unit to replace it", path)
        if invariant in replaced.values():
            raise source.error(f"{invariant} is replaced twice", path)
        replaced[name] = invariant
    staying = tuple(name for name in invariants if name not in replaced.values())
    changes = tuple(_change(source, name, replaced[name], staying, names, invariants) for name in names)
    if changes and not _jacobian(changes):
        raise source.error("the new variables are not independent of each other", ("variables",))
    return changes


def _change(
    source: Source,
    name: str,
    invariant: str,
    staying: Sequence[str],
    names: Sequence[str],
    dimensions: Mapping[str, int],
) -> VariableChange:
    path: Path = ("variables", name)
    text = (source.string(path) or "").partition("=")[2].strip()
    field = ring((*staying, *names))
    try:
        value = parse_rational(text, field)
    except ExpressionError as error:
        raise source.expression_error(error, path) from None
    except ZeroDivisionError:
        raise source.error("the expression divides by zero", path) from None
    if name not in value.variables():
        raise source.error(f"the expression for {invariant} does not depend on {name}", path)
    # under v -> t^dim(v) v the value must scale with t^dim(invariant)
    scaled = ring((*field.names, _SCALE))
    t = scaled.variable(_SCALE)
    images = {v: scaled.variable(v) * t ** dimensions[v] for v in staying}
    images |= {v: scaled.variable(v) for v in names}
    if value.substitute(images) != value.to_ring(scaled) * t ** dimensions[invariant]:
        raise source.error(
            f"the expression for {invariant} has not the mass dimension {dimensions[invariant]} "
            "(new variables have none)",
            path,
        )
    return VariableChange(name, invariant, value, text)


_SCALE = "scale of mass"  # no name that a file can hold


def _jacobian(changes: Sequence[VariableChange]) -> Rational:
    """Determinant of the derivatives of the invariants in the new variables, by expansion."""
    names = [change.name for change in changes]
    rows = [[change.value.derivative(name) for name in names] for change in changes]
    return _determinant(rows)


def _determinant(rows: Sequence[Sequence[Rational]]) -> Rational:
    first = rows[0]
    if len(rows) == 1:
        return first[0]
    total = first[0].ring.zero
    for k, entry in enumerate(first):
        if entry:
            minor = [[e for j, e in enumerate(row) if j != k] for row in rows[1:]]
            total = total + entry * _determinant(minor) * (-1) ** k
    return total
