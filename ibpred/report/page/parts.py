"""The parts of the page, each with all that its template needs; notebooks show them by themselves."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from markupsafe import Markup

from ibpred.family.definition import FamilyDefinition
from ibpred.report.json_common import labelled
from ibpred.report.page import sections
from ibpred.report.page.sections import typesetter

Data = Mapping[str, Any]

_FEW = 4  # masters; with no more of them the groups of formulas are open at first


@dataclass(frozen=True)
class MastersPart:
    """The masters with the pictures of their sectors."""

    masters: tuple[sections.MasterRow, ...]


@dataclass(frozen=True)
class SectorsPart:
    """The graph, U and F, and the classes of equivalent sectors by their corner integrals."""

    picture: Markup
    polynomials: tuple[Markup, ...]
    sectors: int
    zero_sectors: int
    classes: tuple[tuple[str, ...], ...]


@dataclass(frozen=True)
class ReductionsPart:
    """Integrals or sums in terms of masters, these by name; how many are left out for their length."""

    masters: tuple[str, ...]
    formulas: tuple[Markup, ...]
    left_out: int


@dataclass(frozen=True)
class EquationsPart:
    """The differential equations, a group an invariant."""

    derivatives: tuple[sections.Titled, ...]
    few: bool


@dataclass(frozen=True)
class FormPart:
    """The epsilon-form: variables, letters, matrices and transformation, and what stands in its way."""

    ratios: tuple[Markup, ...]
    letters: tuple[Markup, ...]
    canonical: tuple[sections.Titled, ...]
    obstacles: tuple[sections.Obstacle, ...]
    offered: sections.Offered | None
    few: bool


@dataclass(frozen=True)
class SolutionPart:
    """The functions by order, where they hold if that is told, and the boundary constants with provenance."""

    functions: tuple[sections.Titled, ...]
    constants: tuple[sections.ConstantRow, ...]
    region: str
    letters_in_solution: bool
    few: bool


@dataclass(frozen=True)
class ValuesPart:
    """Values at points."""

    values: tuple[sections.ValueTable, ...]


def masters_part(family: FamilyDefinition, masters: Sequence[Sequence[int]]) -> MastersPart:
    """The masters of a family."""
    return MastersPart(sections.master_rows(family, masters))


def sectors_part(family: FamilyDefinition, data: Data) -> SectorsPart:
    """What `inspect` prints."""
    return SectorsPart(
        sections.picture(family),
        sections.polynomials(data, typesetter(family)),
        int(data["sectors"]),
        len(data["zero_sectors"]),
        tuple(tuple("".join(map(str, sector)) for sector in members) for members in data["sector_classes"]),
    )


def reductions_part(family: FamilyDefinition, data: Data) -> ReductionsPart:
    """What `reduce` prints, for one family or several with the same kinematics."""
    named = labelled(data)
    return ReductionsPart(named.masters, *sections.reductions(named, typesetter(family)))


def equations_part(family: FamilyDefinition, data: Data) -> EquationsPart:
    """What `diffeq` prints."""
    return EquationsPart(sections.derivatives(data, typesetter(family)), len(data["masters"]) <= _FEW)


def form_part(family: FamilyDefinition, data: Data | None) -> FormPart:
    """What `epsform` prints; nothing for a family without ratios."""
    if data is None:
        return FormPart((), (), (), (), None, False)
    setter = typesetter(family)
    return FormPart(
        sections.ratios(data, setter),
        sections.letters(data, setter),
        sections.canonical(data, setter),
        sections.obstacles(data),
        sections.offered(data, setter),
        len({entry[0] for entry in data["transformation"]}) <= _FEW,
    )


def solution_part(family: FamilyDefinition, data: Data | None) -> SolutionPart:
    """What `solve` prints; nothing where there is no solution."""
    if data is None:
        return SolutionPart((), (), "", False, False)
    setter = typesetter(family)
    return SolutionPart(
        sections.functions(data, setter),
        sections.constants(data, setter),
        ", ".join(data.get("region", ())),
        bool(data["letters"]),
        len(data["functions"]) <= _FEW,
    )


def values_part(family: FamilyDefinition, tables: Sequence[Data]) -> ValuesPart:
    """What `evaluate` prints, for some points."""
    return ValuesPart(sections.value_tables(family.name, tables))
