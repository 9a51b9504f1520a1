"""What the Python interface returns: the stages' records, shown in notebooks and kept as JSON.

Each result is the record of its stage with the family it belongs to and the JSON object that the command
of the same name prints. `to_json` writes all of that exactly, `from_json` reads it back.
"""

from __future__ import annotations

import json
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field, fields
from fractions import Fraction
from html import escape
from typing import Any, ClassVar, Self

import ibpred
from ibpred.diffeq.system import DifferentialSystem
from ibpred.epsform.form import EpsilonForm, Obstructed
from ibpred.errors import InputError, StoreError
from ibpred.exact.codec import from_data, to_data
from ibpred.family.definition import FamilyDefinition
from ibpred.iterated.solution import Solution
from ibpred.numerics.value import Value
from ibpred.reduction.masters import CommonMasters, Masters
from ibpred.reduction.several import CommonTable
from ibpred.reduction.sums import ReducedSums
from ibpred.reduction.table import ReductionTable
from ibpred.report import latex_lines, text
from ibpred.report.expansions import expansion_text
from ibpred.report.grids import grid_text
from ibpred.report.json_common import labelled
from ibpred.report.latex import expression_latex
from ibpred.report.page import parts
from ibpred.report.page.build import fragment
from ibpred.report.plots import curve_figure
from ibpred.run.values.expansions import Approach, Expansion
from ibpred.sectors.analysis import SectorAnalysis

Data = dict[str, Any]


@dataclass(frozen=True, kw_only=True)
class Result:
    """A record with its family, as a notebook shows it.

    Attributes
    ----------
    definition
        The family.
    shown
        The JSON object that the command prints.
    """

    record: ClassVar[type]
    """The stage's record."""

    definition: FamilyDefinition = field(repr=False)
    shown: Data = field(repr=False, hash=False)

    @classmethod
    def of(cls, record: object, definition: FamilyDefinition, shown: Data) -> Self:
        """The result with a record's content."""
        content = {f.name: getattr(record, f.name) for f in fields(cls.record)}
        return cls(definition=definition, shown=shown, **content)

    def to_json(self) -> str:
        """All of it as JSON text; exact."""
        content = self.record(**{f.name: getattr(self, f.name) for f in fields(self.record)})
        data = {
            "result": type(self).__name__,
            "version": ibpred.__version__,
            "definition": to_data(self.definition),
            "record": to_data(content),
            "shown": self.shown,
        }
        return json.dumps(data, ensure_ascii=False)

    @classmethod
    def from_json(cls, text: str) -> Self:
        """The result that `to_json` wrote.

        Raises
        ------
        InputError
            If the text is none of this kind.
        """
        try:
            data = json.loads(text)
            kind = data["result"]
            definition = from_data(FamilyDefinition, data["definition"])
            record = from_data(cls.record, data["record"]) if kind == cls.__name__ else None
            shown = dict(data["shown"])
        except (ValueError, KeyError, TypeError, StoreError) as error:
            raise InputError(f"this JSON text is no {cls.__name__}: {error}") from error
        if record is None:
            raise InputError(f"this JSON text is a {kind}, not a {cls.__name__}")
        return cls.of(record, definition, shown)

    def _repr_html_(self) -> str:
        raise NotImplementedError

    def _repr_latex_(self) -> str:
        raise NotImplementedError


class _Combined(Result):
    """Objects in terms of masters."""

    def __str__(self) -> str:
        named = labelled(self.shown)
        return "\n".join(
            f"{name} = {text.combination_text([(c, named.masters[index]) for index, c in terms])}"
            for name, terms in named.rows
        )

    def _repr_html_(self) -> str:
        return fragment("reductions", parts.reductions_part(self.definition, self.shown))

    def _repr_latex_(self) -> str:
        return latex_lines.display(latex_lines.reduction_lines(labelled(self.shown)))


@dataclass(frozen=True)
class SectorsResult(SectorAnalysis, Result):
    """The sectors of a family."""

    record = SectorAnalysis

    def __str__(self) -> str:
        return text.inspect_text(self.shown)

    def _repr_html_(self) -> str:
        return fragment("sectors", parts.sectors_part(self.definition, self.shown))

    def _repr_latex_(self) -> str:
        return latex_lines.display([f"{n} &= {expression_latex(self.shown[n])}" for n in ("U", "F")])


@dataclass(frozen=True)
class MastersResult(Masters, Result):
    """The masters of a family."""

    record = Masters

    def __str__(self) -> str:
        return text.masters_text(self.shown)

    def _repr_html_(self) -> str:
        return fragment("masters", parts.masters_part(self.definition, self.masters))

    def _repr_latex_(self) -> str:
        return latex_lines.display(latex_lines.master_lines(self.family, self.masters))


@dataclass(frozen=True)
class ReductionResult(ReductionTable, _Combined):
    """Integrals in terms of the masters."""

    record = ReductionTable


@dataclass(frozen=True)
class CommonMastersResult(CommonMasters, Result):
    """The common masters of several families; `definition` is the first of these."""

    record = CommonMasters

    def __str__(self) -> str:
        return text.common_masters_text(self.shown)

    def _repr_html_(self) -> str:
        return fragment(
            "reductions", parts.reductions_part(self.definition, {**self.shown, "reductions": []})
        )

    def _repr_latex_(self) -> str:
        return latex_lines.display(latex_lines.reduction_lines(labelled({**self.shown, "reductions": []})))


@dataclass(frozen=True)
class CommonReductionResult(CommonTable, _Combined):
    """Integrals of several families in terms of common masters; `definition` is the first family."""

    record = CommonTable


@dataclass(frozen=True)
class SumsResult(ReducedSums, _Combined):
    """Sums of integrals in terms of masters; of several families `definition` is the first."""

    record = ReducedSums


@dataclass(frozen=True)
class DifferentialResult(DifferentialSystem, Result):
    """The differential equations of the masters."""

    record = DifferentialSystem

    def __str__(self) -> str:
        return text.differential_text(self.shown)

    def _repr_html_(self) -> str:
        return fragment("equations", parts.equations_part(self.definition, self.shown))

    def _repr_latex_(self) -> str:
        matrices = self.shown["matrices"]
        lines = [
            line for name in self.variables for line in latex_lines.derivative_lines(name, matrices[name])
        ]
        return latex_lines.display(lines)


class _Formed(Result):
    """What is common to an epsilon-form and to what stands in the way of one."""

    def __str__(self) -> str:
        return text.epsilon_text(self.shown)

    def _repr_html_(self) -> str:
        return fragment("form", parts.form_part(self.definition, self.shown))

    def _repr_latex_(self) -> str:
        groups = [latex_lines.letter_lines(self.shown, letter) for letter in self.shown["letters"]]
        groups.append(latex_lines.transformation_lines(self.shown))
        return latex_lines.display([line for group in groups for line in group])


@dataclass(frozen=True)
class FormResult(EpsilonForm, _Formed):
    """The epsilon-form of the masters."""

    record = EpsilonForm


@dataclass(frozen=True)
class ObstructedResult(Obstructed, _Formed):
    """What stands in the way of an epsilon-form, and the form of the rest."""

    record = Obstructed


@dataclass(frozen=True)
class SolutionResult(Solution, Result):
    """The canonical functions in iterated integrals."""

    record = Solution

    def __str__(self) -> str:
        return text.solution_text(self.shown)

    def _repr_html_(self) -> str:
        return fragment("solution", parts.solution_part(self.definition, self.shown))

    def _repr_latex_(self) -> str:
        return latex_lines.display(latex_lines.function_lines(self.shown))


@dataclass(frozen=True)
class PointValues:
    """Integrals at a point.

    Attributes
    ----------
    point
        The invariants.
    values
        One an integral, in the order asked.
    """

    point: Mapping[str, Fraction]
    values: tuple[Value, ...]

    def __iter__(self) -> Iterator[Value]:
        return iter(self.values)

    def __len__(self) -> int:
        return len(self.values)

    def __getitem__(self, place: int) -> Value:
        return self.values[place]


@dataclass(frozen=True)
class ValuesResult(PointValues, Result):
    """Values at a point; iterating gives them one by one."""

    record = PointValues

    def __str__(self) -> str:
        return text.values_text(self.shown)

    def _repr_html_(self) -> str:
        return fragment("values", parts.values_part(self.definition, [self.shown]))

    def _repr_latex_(self) -> str:
        return latex_lines.display(latex_lines.value_lines(self.shown))


@dataclass(frozen=True)
class GridValues:
    """Integrals on a grid.

    Attributes
    ----------
    points
        The points with their values, in the order of the grid.
    left_out
        Points without values, and why.
    """

    points: tuple[PointValues, ...]
    left_out: tuple[tuple[Mapping[str, Fraction], str], ...]


@dataclass(frozen=True)
class GridResult(GridValues, Result):
    """Values on a grid; a notebook plots those along a curve."""

    record = GridValues

    def __str__(self) -> str:
        return grid_text(self.shown)

    def _repr_html_(self) -> str:
        if len(self.shown["grid"]) == 1 and self.points:
            return curve_figure(self.shown, "svg").decode()
        tables = [
            {"family": self.shown["family"], **entry, "digits": self.shown["digits"]}
            for entry in self.shown["points"]
        ]
        return fragment("values", parts.values_part(self.definition, tables))

    def _repr_latex_(self) -> str:
        lines = []
        for entry in self.shown["points"]:
            point = ",".join(f"{expression_latex(n)}={v}" for n, v in entry["point"].items())
            found = latex_lines.value_lines({"family": self.shown["family"], **entry})
            lines += [rf"{point}:&", *found]
        return latex_lines.display(lines)


@dataclass(frozen=True)
class NearPoint:
    """Integrals near a point.

    Attributes
    ----------
    approach
        Where the expansion is, and in what.
    fixed
        The other invariants.
    expansions
        One an integral, in the order asked.
    """

    approach: Approach
    fixed: Mapping[str, Fraction]
    expansions: tuple[Expansion, ...]


@dataclass(frozen=True)
class ExpansionResult(NearPoint, Result):
    """Expansions in the distance from a point."""

    record = NearPoint

    def __str__(self) -> str:
        return expansion_text(self.shown)

    def _repr_html_(self) -> str:
        return f"<pre>{escape(str(self))}</pre>"

    def _repr_latex_(self) -> str:
        return latex_lines.display(latex_lines.expansion_lines(self.shown))
