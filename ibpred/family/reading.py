"""Reading a family file: TOML text to a complete `FamilyDefinition`, or one clear error."""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence

from ibpred.errors import ExpressionError, FamilyFileError
from ibpred.exact.rational import Rational, Ring, ring
from ibpred.family.crossings import read_crossings
from ibpred.family.definition import FamilyDefinition, Invariant
from ibpred.family.kinematics import (
    ContradictionError,
    UndeterminedError,
    dimension_text,
    dimensions_in,
    solve_gram,
)
from ibpred.family.lines import Space, completed
from ibpred.family.momenta import Form, Momenta, parse_equation
from ibpred.family.polynomials import symanzik
from ibpred.family.reading_graph import read_edges, read_joins, read_loop_names
from ibpred.family.reading_lines import check_independent, read_lines
from ibpred.family.recognition import recognise
from ibpred.family.region import read_region
from ibpred.family.source import Path, Source, parse_source
from ibpred.family.variables import read_variables

SECTIONS = ("title", "dimension", "momenta", "kinematics", "line", "edge", "legs", "crossings", "variables")
RESERVED = {"d": "the space-time dimension", "eps": "the regulator"}

_IDENTIFIER = re.compile(r"[A-Za-z_][A-Za-z_0-9]*\Z")


def read_family(text: str, file: str, name: str) -> FamilyDefinition:
    """Read a family file.

    Parameters
    ----------
    text
        The file's content (TOML).
    file
        Its name, for messages.
    name
        The family's name, by habit the file's stem.

    Returns
    -------
    FamilyDefinition
        Complete: the Gram matrix is known, momenta of a graph are routed, the graph of momenta is recognised,
        missing numerators are there.

    Raises
    ------
    FamilyFileError
        With file, line and entry, at the first thing that is wrong.
    """
    source = parse_source(text, file)
    source.table((), SECTIONS)
    title = source.string(("title",))
    dimension = source.integer(("dimension",))
    if dimension is not None and dimension < 1:
        raise source.error("dimension must be a positive integer", ("dimension",))
    edges = source.tables("edge", ("joins", "mass2", "cut"))
    lines = source.tables("line", ("momentum", "mass2", "expression", "cut", "numerator"))
    if not edges and not lines:
        raise source.error("the family has no lines: add [[line]] or [[edge]] sections", ())
    if not edges and "legs" in source.data:
        raise source.error("[legs] belongs to a graph: add [[edge]] sections", ("legs",))

    loops, external = _read_momenta(source)
    invariants = _read_invariants(source)
    _check_names(source, loops, external, invariants)
    momenta = Momenta((*loops, *external), ring(invariants))
    equations = _read_equations(source, momenta, loops)
    own = _read_dimensions(source, external, equations, invariants)
    dimensions = {**dict.fromkeys(loops, 1), **own, **invariants}
    for number, equation in enumerate(equations):
        found = dimensions_in(equation, dimensions)
        if len(set(found.values())) > 1 or None in found.values():
            raise _equation_error(source, number, f"wrong mass dimension: {dimension_text(found)}")
    gram = _solve(source, external, equations, momenta.ring)
    space = Space(momenta, loops, external, tuple(own[p] for p in external), gram)
    graph, edge_lines = read_edges(source, space, dimensions) if edges else (None, ())
    records = (*edge_lines, *read_lines(source, space, dimensions, only_numerators=bool(edges)))
    check_independent(source, records, space, edges=len(edges))
    if graph is None:
        graph = recognise([line for line in records if not line.numerator], len(loops), external)
    unit = _read_unit(source, invariants)
    family = FamilyDefinition(
        name=name,
        title=title if title is not None else name,
        loops=loops,
        external=external,
        invariants=tuple(Invariant(v, n) for v, n in invariants.items()),
        unit=unit,
        dimension=4 if dimension is None else dimension,
        gram=gram,
        lines=completed(records, space),
        graph=graph,
        crossings=read_crossings(source, external, gram, momenta.ring),
        variables=read_variables(source, invariants, unit),
        region=read_region(source, invariants, {v for line in records for v in line.mass2.variables()}),
    )
    if not symanzik(family)[0]:
        raise source.error(
            "the lines that are no numerators leave some loop momentum unbounded (their U vanishes), so all "
            "integrals are zero; add the missing lines",
            ("edge", 0) if edges else ("line", 0),
        )
    return family


def _read_momenta(source: Source) -> tuple[tuple[str, ...], tuple[str, ...]]:
    """Names of the loop momenta and of the independent external momenta."""
    graph = "edge" in source.data
    if "momenta" not in source.data and not graph:
        raise source.error('the section [momenta] is missing; it says loop = ["k"], external = ["p"]', ())
    source.table(("momenta",), ("loop", "external"))
    loops = source.strings(("momenta", "loop"))
    external = source.strings(("momenta", "external"))
    if external is None:  # of a graph: all legs but the last, which depends on them
        external = tuple(source.integers(("legs",)))[:-1]
    if graph:
        loops = read_loop_names(source, read_joins(source), loops)
    if not loops:
        raise source.error('there is no loop momentum; write e.g. loop = ["k"]', ("momenta", "loop"))
    return loops, external


def _read_invariants(source: Source) -> dict[str, int]:
    if "kinematics" not in source.data:
        raise source.error(
            "the section [kinematics] is missing; it says invariants = { s = 2 } and the equations", ()
        )
    source.table(("kinematics",), ("invariants", "equations", "unit", "dimensions", "region"))
    return source.integers(("kinematics", "invariants"))


def _check_names(
    source: Source, loops: Sequence[str], external: Sequence[str], invariants: Mapping[str, int]
) -> None:
    seen: dict[str, str] = {}
    groups: tuple[tuple[str, Path, Sequence[str]], ...] = (
        ("a loop momentum", ("momenta", "loop"), loops),
        ("an external momentum", ("momenta", "external"), external),
        ("an invariant", ("kinematics", "invariants"), tuple(invariants)),
        ("a variable", ("variables",), tuple(source.data.get("variables", ()))),
    )
    for kind, path, names in groups:
        for name in names:
            if not _IDENTIFIER.match(name):
                raise source.error(
                    f"{name!r} is no name: use a letter, then letters, digits and underscores", path
                )
            if name in RESERVED:
                raise source.error(f"the name {name!r} is taken by {RESERVED[name]}; choose another", path)
            if name in seen:
                both = f": {seen[name]} and {kind}" if seen[name] != kind else ""
                raise source.error(f"the name {name!r} is given twice{both}", path)
            seen[name] = kind


def _equation_error(source: Source, number: int, problem: str) -> FamilyFileError:
    texts = source.strings(("kinematics", "equations")) or ()
    text = texts[number]
    return source.error(problem, ("kinematics", "equations"), text, texts[:number].count(text))


def _read_equations(source: Source, momenta: Momenta, loops: Sequence[str]) -> tuple[Form, ...]:
    path = ("kinematics", "equations")
    forms = []
    texts = source.strings(path) or ()
    for number, text in enumerate(texts):
        try:
            form = parse_equation(text, momenta)
        except ExpressionError as error:
            raise source.expression_error(error, path, text, texts[:number].count(text)) from None
        used = [name for name in loops if any(name in term for term in form.terms)]
        if used:
            raise _equation_error(
                source, number, f"the loop momentum {used[0]} has no place in an equation of the kinematics"
            )
        forms.append(form)
    return tuple(forms)


def _read_dimensions(
    source: Source, external: Sequence[str], equations: Sequence[Form], invariants: Mapping[str, int]
) -> dict[str, int]:
    """Mass dimensions of the external momenta: as given; 0 for v with v^2 = number; else 1."""
    given = source.integers(("kinematics", "dimensions"))
    for name in given:
        if name not in external:
            known = ", ".join(external) or "none"
            hint = " (an invariant's goes to invariants)" if name in invariants else ""
            raise source.error(
                f"{name!r} is no external momentum{hint}; known are {known}",
                ("kinematics", "dimensions", name),
            )
    found = dict.fromkeys(external, 1)
    for equation in equations:
        for name in external:
            if set(equation.terms) == {(name, name), ()} and all(
                value.is_constant() for value in equation.terms.values()
            ):
                found[name] = 0
    return {**found, **given}


def _solve(
    source: Source, external: Sequence[str], equations: Sequence[Form], ring_: Ring
) -> tuple[tuple[Rational, ...], ...]:
    try:
        return solve_gram(external, equations, ring_)
    except ContradictionError as error:
        texts = source.strings(("kinematics", "equations")) or ()
        last = error.equations[-1]
        others = [texts[i] for i in error.equations[:-1]]
        if others:
            listed = ", ".join(f"{text!r}" for text in others)
            problem = f"this equation contradicts {listed}: together they give {error.relation} = 0"
        else:
            problem = f"this equation says {error.relation} = 0"
        if not error.relation.is_constant():
            problem += "; invariants are independent, so drop one of them"
        raise _equation_error(source, last, problem) from None
    except UndeterminedError as error:
        listed = ", ".join(f"{a}^2" if a == b else f"{a}*{b}" for a, b in error.products)
        raise source.error(
            f"the equations do not determine {listed}; add the missing ones",
            ("kinematics", "equations") if "equations" in source.data["kinematics"] else ("kinematics",),
        ) from None


def _read_unit(source: Source, invariants: Mapping[str, int]) -> str | None:
    path = ("kinematics", "unit")
    unit = source.string(path)
    if unit is None:
        if not any(invariants.values()):
            return None  # nothing with a dimension to set to one
        fit = [v for v, n in invariants.items() if n and not any(m % n for m in invariants.values())]
        if not fit:
            raise source.error(
                "no invariant can be the unit: no mass dimension divides all the others; add an invariant",
                ("kinematics", "invariants"),
            )
        return fit[0]
    if unit not in invariants:
        known = ", ".join(invariants) or "none"
        raise source.error(f"the unit {unit!r} is no invariant; known are {known}", path)
    own = invariants[unit]
    if own == 0:
        raise source.error(f"the unit {unit} has mass dimension 0; choose another unit", path)
    for name, dimension in invariants.items():
        if dimension % own:
            raise source.error(
                f"the mass dimension {dimension} of {name} is no multiple of the unit's, {own}; "
                "choose another unit",
                path,
            )
    return unit
