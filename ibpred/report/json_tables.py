"""Results as the JSON objects that the commands print."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction
from typing import Any

from ibpred.boundary.conditions.fix import Boundary
from ibpred.diffeq.ratios import Coordinates, DimensionlessSystem
from ibpred.diffeq.system import DifferentialSystem
from ibpred.epsform.form import EpsilonForm, Obstructed, OddLetter, PeriodForm
from ibpred.epsform.variables import Variables
from ibpred.exact.polynomial import polynomial_text
from ibpred.exact.rational import Rational
from ibpred.family.definition import FamilyDefinition
from ibpred.family.polynomials import symanzik
from ibpred.family.signs import euclidean_signs, region_signs
from ibpred.iterated.alphabet import Letter, RootLetter
from ibpred.iterated.solution import Product, Solution, function_text, named_letters
from ibpred.numerics.value import Value
from ibpred.reduction.independent import SectorCount
from ibpred.reduction.masters import Masters
from ibpred.sectors.analysis import SectorAnalysis

Data = dict[str, Any]


def corner(sector: int, lines: int) -> list[int]:
    """Powers of a sector's corner integral: one for its lines, zero for the others."""
    return [sector >> i & 1 for i in range(lines)]


def inspect_data(family: FamilyDefinition, analysis: SectorAnalysis) -> Data:
    """What `inspect` prints; sectors are given by the powers of their corner integrals."""
    first, second = symanzik(family)
    lines = len(family.lines)
    return {
        "family": family.name,
        "loops": len(family.loops),
        "legs": len(family.external) + 1 if family.external else 0,
        "U": first.text(),
        "F": second.text(),
        "sectors": len(analysis.sectors),
        "zero_sectors": [corner(sector, lines) for sector in sorted(analysis.zero)],
        "sector_classes": [[corner(sector, lines) for sector in members] for members in analysis.classes],
    }


def masters_data(family: FamilyDefinition, masters: Masters) -> Data:
    """What `masters` prints."""
    return {
        "family": family.name,
        "count": len(masters.masters),
        "masters": [
            {"powers": list(powers), "lines": sum(a > 0 for a in powers)} for powers in masters.masters
        ],
    }


def counts_data(family: FamilyDefinition, counts: Sequence[SectorCount]) -> Data:
    """The independent count that `masters` prints with the masters."""
    lines = len(family.lines)
    return {
        "sectors": len(counts),
        "agreeing": sum(count.agrees for count in counts),
        "others": [
            {
                "sector": corner(count.sector, lines),
                "masters": count.masters,
                "critical_points": count.points,
                "note": count.note,
            }
            for count in counts
            if not count.agrees
        ],
    }


def differential_data(system: DifferentialSystem) -> Data:
    """What `diffeq` prints."""
    return {
        "family": system.family,
        "masters": [list(powers) for powers in system.masters],
        "variables": list(system.variables),
        "matrices": {
            name: [[row, column, value.factored_text()] for row, column, value in system.matrices[name]]
            for name in system.variables
        },
    }


def letter_text(letter: Rational) -> str:
    """A letter with its constant term first: ``1+x``."""
    terms = sorted(letter.numerator.to_dict().items(), key=lambda item: (sum(item[0]), item[0]))
    context = letter.ring.context
    texts = [polynomial_text(context.from_dict(dict([term]))) for term in terms]
    return "+".join(texts).replace("+-", "-")


def root_text(roots: Sequence[int], form: EpsilonForm) -> str:
    """The product under a square root; empty for no root."""
    factors = [letter_text(form.radicands[k]) for k in roots]
    if len(factors) == 1:
        return factors[0]
    return "*".join(f if f.isidentifier() else f"({f})" for f in factors)


def odd_letter_text(letter: OddLetter, form: EpsilonForm) -> str:
    """A letter with a square root: ``(x-sqrt(x*(4+x)))/(x+sqrt(x*(4+x)))``."""
    return _odd_text(letter.polynomial, root_text(letter.roots, form))


def _odd_text(polynomial: Rational, square: str) -> str:
    above = polynomial.factored_text()
    if "+" in above or "-" in above:
        above = letter_text(polynomial) if polynomial.denominator.is_one() else f"({above})"
    return f"({above}-sqrt({square}))/({above}+sqrt({square}))"


def _level_letter_text(letter: Letter) -> str:
    """A letter of one level of a solution."""
    if not isinstance(letter, RootLetter):
        return letter_text(letter)
    content, factors = letter.square.factors()
    context = letter.square.ring.context
    texts = [letter_text(letter.square.ring.fraction(f, context.constant(1))) for f, _ in factors]
    powers = [f"^{m}" if m > 1 else "" for _, m in factors]
    if content == 1 and len(texts) == 1 and not powers[0]:
        return _odd_text(letter.polynomial, texts[0])
    number = [] if content == 1 else [str(content)]
    product = [(t if t.isidentifier() else f"({t})") + power for t, power in zip(texts, powers, strict=True)]
    return _odd_text(letter.polynomial, "*".join([*number, *product]))


def sparse(matrix: Sequence[Sequence[Fraction | Rational]]) -> list[list[Any]]:
    """Nonzero entries as (row, column, text)."""
    return [
        [i, j, value.factored_text() if isinstance(value, Rational) else str(value)]
        for i, row in enumerate(matrix)
        for j, value in enumerate(row)
        if value
    ]


def epsilon_data(
    family: FamilyDefinition,
    system: DimensionlessSystem,
    outcome: EpsilonForm | Obstructed,
    offered: tuple[Coordinates, Variables] | None = None,
) -> Data:
    """What `epsform` prints; where some block is obstructed, the rest of the system is given.

    Variables in which the roots are rational that are not used are offered beside it.
    """
    form = outcome.solved if isinstance(outcome, Obstructed) else outcome
    data: Data = {
        "family": family.name,
        "variables": list(system.ratios),
        "ratios": dict(zip(system.ratios, system.definitions, strict=True)),
        "letters": [],
        "matrices": {},
        "transformation": [],
        "obstructions": [],
    }
    if form is not None:
        even = [letter_text(letter) for letter in form.letters]
        odd = [odd_letter_text(letter, form) for letter in form.odd_letters]
        matrices = (*form.matrices, *form.odd_matrices)
        data["letters"] = [*even, *odd]
        data["matrices"] = {
            text: sparse(matrix) for text, matrix in zip(data["letters"], matrices, strict=True)
        }
        roots = [root_text(tag, form) for tag in form.tags]
        data["transformation"] = [
            [row, column, f"{value}/sqrt({roots[column]})" if roots[column] else value]
            for row, column, value in sparse(form.transformation)
        ]
    if isinstance(outcome, Obstructed):
        data["rows"] = list(outcome.rows)
        data["complete"] = outcome.complete
        data["obstructions"] = [
            {
                "rows": list(obstruction.rows),
                "reason": obstruction.reason,
                "operator": obstruction.operator,
                "exponents": [[place, list(found)] for place, found in obstruction.exponents],
                "factors": list(obstruction.factors),
                "operator_exponents": [
                    [place, list(found)] for place, found in obstruction.operator_exponents
                ],
                "geometry": obstruction.geometry,
                "period_form": None
                if obstruction.period_form is None
                else period_data(obstruction.period_form),
            }
            for obstruction in outcome.obstructions
        ]
    if offered is not None:
        coordinates, variables = offered
        data["offered_variables"] = {
            "variables": dict(zip(coordinates.names, coordinates.definitions, strict=True)),
            "radicands": [letter_text(radicand) for radicand in variables.radicands],
            "letters_linear": variables.linear,
        }
    return data


_SHOWN_TERMS = 8


def period_data(form: PeriodForm) -> Data:
    """An epsilon-form with periods: ``theta M = eps B M`` with theta = t d/dt, power series in t."""

    def shown(numbers: Sequence[Fraction]) -> list[str]:
        return [str(value) for value in numbers[:_SHOWN_TERMS]]

    def table(rows: Sequence[Sequence[Sequence[Fraction]]]) -> list[list[Any]]:
        return [[i, j, shown(e)] for i, row in enumerate(rows) for j, e in enumerate(row) if any(e)]

    return {
        "point": form.point,
        "t": form.coordinate,
        "function": [[i, value.factored_text()] for i, value in enumerate(form.row) if value],
        "exponent": str(form.exponent),
        "psi0": shown(form.period),
        "kernels": [shown(kernel) for kernel in form.kernels],
        "gauge": [[power, table(rows)] for power, rows in form.gauge],
        "matrix": table(form.matrix),
        "closed": [[i, j, text] for i, j, text in form.closed],
    }


def solution_data(family: FamilyDefinition, boundary: Boundary, solution: Solution) -> Data:
    """What `solve` prints: canonical functions by order, and the boundary constants at the corner.

    A term holds one word for each level; with one ratio at most this is its ``word``. Letters that are not
    linear in the ratio of their level have names in the texts, which ``named`` explains. The functions hold
    in the Euclidean region and wherever i0 leads from there, or else in the ``region`` that is named.
    """
    names = [[_level_letter_text(letter) for letter in level.letters] for level in solution.levels]
    functions = []
    for row in range(len(boundary.constants[0])):
        orders = []
        for k, layer in enumerate(solution.orders):
            terms = [_term(product, str(value), names) for product, value in layer[row]]
            orders.append(
                {
                    "order": solution.start + k,
                    "text": function_text(layer[row], solution.levels),
                    "terms": terms,
                }
            )
        functions.append({"master": row, "orders": orders})
    marked = {(item.row, item.order): item.fit for item in boundary.fitted}
    constants = []
    for k, vector in enumerate(boundary.constants):
        for row, value in enumerate(vector):
            if value:
                constant: Data = {"master": row, "order": boundary.start + k, "value": str(value)}
                fit = marked.get((row, boundary.start + k))
                if fit is not None:
                    constant["fitted"] = {"digits": fit.digits, "odds": f"1e{fit.odds}"}
                constants.append(constant)
    short = {name: _level_letter_text(letter) for letter, name in named_letters(solution.levels).items()}
    region = _region(family, solution)
    return {
        "family": family.name,
        **({"region": region} if region else {}),
        "letters": list(dict.fromkeys(name for level in names for name in level)),
        **({"named": short} if short else {}),
        "corner": list(boundary.corner),
        "levels": [
            {"variable": level.variable, "letters": listed}
            for level, listed in zip(solution.levels, names, strict=True)
        ],
        "functions": functions,
        "constants": constants,
    }


def _region(family: FamilyDefinition, solution: Solution) -> list[str]:
    """Where the constants hold, if not in a Euclidean region; empty for that."""
    signs = region_signs(family)
    if euclidean_signs(family) == signs:
        return []
    found = [f"{name} {'>' if sign > 0 else '<'} 0" for name, sign in signs.items()]
    if len(solution.levels) > 1:
        corner = " << ".join((*(level.variable for level in solution.levels), "1"))
        return [*found, f"{corner} and on to the nearest letters"]
    for level in solution.levels:
        roots = [root.to_fraction() for root in level.roots() if root is not None and not root.variables()]
        nearest = min((root for root in roots if root > 0), default=None)
        found.append(f"{level.variable} > 0" if nearest is None else f"0 < {level.variable} < {nearest}")
    return found


def _term(product: Product, coefficient: str, names: Sequence[Sequence[str]]) -> Data:
    words = [[names[level][letter] for letter in word] for level, word in enumerate(product)]
    if len(words) > 1:
        return {"words": words, "coefficient": coefficient}
    return {"word": words[0] if words else [], "coefficient": coefficient}


def values_data(
    family: FamilyDefinition, point: Mapping[str, Fraction], digits: int, values: Sequence[Value]
) -> Data:
    """What `evaluate` prints."""
    return {
        "family": family.name,
        "point": {name: str(value) for name, value in point.items()},
        "digits": digits,
        "integrals": [value_data(value) for value in values],
    }


def value_data(value: Value) -> Data:
    """One integral's value; the digits reached are those of its least known coefficient."""
    data: Data = {
        "powers": list(value.powers),
        "epsilon": {
            str(order): {"re": ball.re, "im": ball.im, "radius": ball.radius}
            for order, ball in sorted(value.epsilon.items())
        },
        "certified": value.certified,
        "digits_reached": value.digits(),
    }
    if value.route is not None:
        data["route"] = value.route.value
    return data
