"""Exact boundary values on a ray: regions fix the solution in every class of exponents.

``I_i = sum_b h^(a_ib + b eps) C_ib (1 + O(h))`` over the regions of each master, with C_ib products of Gamma
functions, against ``sum_b h^(b eps) sum_n v_bn h^n``. The conditions that are not needed are evidence.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction

from ibpred.boundary.behaviour.approach import Approach
from ibpred.boundary.behaviour.expansion import ClosedForm
from ibpred.boundary.behaviour.regions import ParametricFamily, Region, regions
from ibpred.diffeq.system import DifferentialSystem
from ibpred.errors import BoundaryError, UnfinishedError
from ibpred.exact.rational import Rational
from ibpred.iterated.constants.constants import ZERO, Constant
from ibpred.iterated.constants.series import Series, eps_valuation, laurent
from ibpred.numerics.corner.classes import ClassSolutions, class_solutions
from ibpred.numerics.corner.field import FIELD, Matrix, echelon
from ibpred.numerics.corner.system import ray_system
from ibpred.numerics.frobenius.formal import SingularPoint, resonance
from ibpred.numerics.frobenius.spectrum import fractional_part
from ibpred.numerics.laurent.local_laurent import LocalSystem

Value = tuple[tuple[Rational, ClosedForm], ...]
"""A sum of elements of Q(eps) times closed forms without scales."""


@dataclass(frozen=True)
class FixedClass:
    """The solution of one class that the masters are: ``v_n = sum_r terms[n][:, r] values[r]``.

    Attributes
    ----------
    power, slope
        a and b.
    terms
        Over Q(eps).
    values
        What the regions give.
    """

    power: Fraction
    slope: Fraction
    terms: tuple[Matrix, ...]
    values: tuple[Value, ...]


@dataclass(frozen=True)
class CornerSolution:
    """The masters near the start of a ray.

    Attributes
    ----------
    gauge
        ``I_i = h^gauge[i] g_i``.
    classes
        One for each slope and class of powers modulo the integers.
    checks
        How many redundant conditions held.
    """

    gauge: tuple[int, ...]
    classes: tuple[FixedClass, ...]
    checks: int


@dataclass(frozen=True)
class StartConstants:
    """Exact constants of the local solutions, for `ibpred.numerics.laurent.local_laurent`.

    Attributes
    ----------
    lowest
        The power of eps of the first order.
    orders
        For each order and class one constant for each solution.
    """

    lowest: int
    orders: tuple[tuple[tuple[Constant, ...], ...], ...]


def corner_solution(
    system: DifferentialSystem,
    representation: ParametricFamily,
    images: Mapping[str, Rational],
    local: LocalSystem,
) -> CornerSolution:
    """Fix the masters near the start of a ray by their regions.

    Parameters
    ----------
    system
        The differential equations.
    representation
        U and F on the ray, in terms of h, all coefficients positive for small h > 0.
    images
        The invariants in terms of h.
    local
        The local system order by order, whose gauge and exponents are used.

    Raises
    ------
    UnfinishedError
        If the regions of a master are not known, do not fix the solution, or need logarithms.
    BoundaryError
        If regions and differential equations contradict each other.
    """
    size = len(system.masters)
    gauge = local.point.gauge[:size]
    approach = Approach((), "h", Fraction(0))
    of_masters = []
    for powers in system.masters:
        found = regions(representation, powers, approach)
        if found is None:
            raise UnfinishedError(f"nothing is known of the regions of {powers} at the corner")
        of_masters.append(found)
    spans = {c: resonance(local.point, c) for c in local.point.spectrum.classes()}
    classes = sorted(
        {(fractional_part(r.exponent.power[0]), r.exponent.slope[0]) for rs in of_masters for r in rs}
    )
    length = 1 + max(
        [last for _, last in spans.values()]
        + [
            int(r.exponent.power[0] - spans[fractional_part(r.exponent.power[0])][0]) - gauge[i]
            for i, found in enumerate(of_masters)
            for r in found
            if fractional_part(r.exponent.power[0]) in spans
        ]
    )
    expanded = ray_system(system, images, gauge, length)
    fixed, checks = [], 0
    for part, slope in classes:
        if part not in spans:
            raise BoundaryError(f"a region has the power {part} modulo the integers, the equations have not")
        least, last = spans[part]
        solutions = class_solutions(expanded, least, slope, last)
        if solutions is None:
            raise BoundaryError(
                f"regions behave like h^({part} + {slope}*eps), which the differential equations forbid"
            )
        one, held = _fixed(solutions, gauge, of_masters, part)
        fixed.append(one)
        checks += held
    return CornerSolution(gauge, tuple(fixed), checks)


def _fixed(
    solutions: ClassSolutions, gauge: Sequence[int], masters: Sequence[Sequence[Region]], part: Fraction
) -> tuple[FixedClass, int]:
    if not solutions.complete and any(
        any(r.exponent.logs)
        for found in masters
        for r in found
        if r.exponent.slope[0] == solutions.slope and fractional_part(r.exponent.power[0]) == part
    ):
        raise UnfinishedError(
            f"exponents {part} + {solutions.slope}*eps modulo the integers may have logarithms at generic eps"
        )
    rows: list[list[Rational]] = []
    values: list[Value] = []
    leading: list[tuple[int, list[Rational], list[Region]]] = []
    for i, found in enumerate(masters):
        own = [
            r
            for r in found
            if r.exponent.slope[0] == solutions.slope and fractional_part(r.exponent.power[0]) == part
        ]
        first = min((r.exponent.power[0] for r in own), default=None)
        for n, matrix in enumerate(solutions.terms):
            power = solutions.power + n + gauge[i]
            if first is None or power < first:
                rows.append(list(matrix[i]))
                values.append(())
            elif power == first:
                lead = [r for r in own if r.exponent.power[0] == first]
                leading.append((sum(_effort(r) for r in lead), list(matrix[i]), lead))
    # the cheapest values that fix the solution, and one more as evidence
    spare = False
    for _, row, lead in sorted(leading, key=lambda item: item[0]):
        independent = len(echelon([*rows, row], solutions.count)[1]) > len(echelon(rows, solutions.count)[1])
        if not independent and spare:
            continue
        value = _leading(lead)
        if value is not None:
            rows.append(row)
            values.append(value)
            spare = spare or not independent
    count = solutions.count
    # the right sides are carried along as combinations of what is given
    identity = [[FIELD.one if i == j else FIELD.zero for j in range(len(rows))] for i in range(len(rows))]
    reduced, pivots = echelon([[*row, *unit] for row, unit in zip(rows, identity, strict=True)], count)
    if len(pivots) < count:
        raise UnfinishedError(
            f"the regions with h^({solutions.slope}*eps) do not fix {count - len(pivots)} of the solutions"
        )
    given = [r for r, value in enumerate(values) if value]
    checks = 0
    for row in reduced[count:]:
        _check([(row[count + r], values[r]) for r in given], solutions.slope)
        checks += 1
    chosen = [[row[count + r] for r in given] for row in reduced[:count]]
    terms = tuple(_product(matrix, chosen, len(given)) for matrix in solutions.terms)
    return FixedClass(solutions.power, solutions.slope, terms, tuple(values[r] for r in given)), checks


def _product(matrix: Matrix, chosen: Matrix, width: int) -> Matrix:
    found = []
    for row in matrix:
        out = [FIELD.zero] * width
        for value, line in zip(row, chosen, strict=True):
            if value:
                out = [a + value * b if b else a for a, b in zip(out, line, strict=True)]
        found.append(out)
    return found


def _effort(region: Region) -> int:
    return 0 if region.leading is None else len(region.leading.pieces)


def _leading(own: Sequence[Region]) -> Value | None:
    found = []
    for region in own:
        pieces = None if region.leading is None else region.leading.closed
        if pieces is None:
            return None
        found += [(closed.rational.to_ring(FIELD) * number, closed) for number, closed in pieces]
    return tuple(found)


_CHECK_ORDERS = 3


def _check(terms: Sequence[tuple[Rational, Value]], slope: Fraction) -> None:
    """A redundant condition: the combination of Gamma functions must vanish, as far as it is expanded."""
    parts = [(factor * rational, closed) for factor, value in terms for rational, closed in value if factor]
    if not parts:
        return
    lowest = min(eps_valuation(factor) for factor, _ in parts)
    total = _expanded(parts, lowest + _CHECK_ORDERS)
    if any(total.coefficients):
        raise BoundaryError(
            f"the regions with h^({slope}*eps) contradict the differential equations at the corner"
        )


def _expanded(parts: Sequence[tuple[Rational, ClosedForm]], order: int) -> Series:
    total = Series(order + 1, ())
    for closed, factor in _by_form(parts):
        start = eps_valuation(factor)
        if start <= order:
            term = laurent(factor, order) * closed.transcendental(order - start + 1)
            total = term if not total.coefficients else total + term
    return total


def _by_form(parts: Sequence[tuple[Rational, ClosedForm]]) -> list[tuple[ClosedForm, Rational]]:
    """The factors of forms that differ by an element of Q(eps) only, added up."""
    found: list[tuple[ClosedForm, Rational]] = []
    for factor, closed in parts:
        bare = replace(closed, rational=FIELD.one)
        for place, (other, total) in enumerate(found):
            if other == bare:
                found[place] = (other, total + factor)
                break
        else:
            found.append((bare, factor))
    return [(closed, factor) for closed, factor in found if factor]


def start_constants(
    solution: CornerSolution, shifts: Sequence[int], local: LocalSystem, lowest: int
) -> StartConstants:
    """The constants of the local solutions order by order.

    The coefficient of ``h^(exponent)`` without logarithms, in the direction of a basis vector of the residue,
    is the constant of the solution that starts there.

    Parameters
    ----------
    solution
        See `corner_solution`.
    shifts
        r_i of the expanded system.
    local
        The local system; its depth says how many orders are wanted.
    lowest
        Power of eps of its first order.

    Raises
    ------
    BoundaryError
        If an expansion needs a constant that is not among the exact ones.
    """
    point, depth, size = local.point, local.depth, len(shifts)
    order = lowest + depth - 1
    orders: list[list[tuple[Constant, ...]]] = [[] for _ in range(depth)]
    for part in local.classes:
        residue_class = fractional_part(part.exponent)
        members = [
            i for i, e in enumerate(point.spectrum.exponents[:size]) if fractional_part(e) == residue_class
        ]
        vectors: dict[int, list[Series]] = {}
        found: list[list[Constant]] = [[] for _ in range(depth)]
        for i in members:
            n = int(point.spectrum.exponents[i] - part.exponent)
            if n not in vectors:
                vectors[n] = _vector(solution, residue_class, n, shifts, order)
            for k in range(depth):
                found[k].append(_component(point, vectors[n], k * size + i, lowest))
        for k in range(depth):
            orders[k].append(tuple(found[k]))
    return StartConstants(lowest, tuple(tuple(line) for line in orders))


def _vector(
    solution: CornerSolution, residue_class: Fraction, n: int, shifts: Sequence[int], order: int
) -> list[Series]:
    found = []
    for i, shift in enumerate(shifts):
        parts = []
        for item in solution.classes:
            if fractional_part(item.power) == residue_class:
                for factor, value in zip(item.terms[n][i], item.values, strict=True):
                    parts += [(factor * rational, closed) for rational, closed in value if factor]
        series = _expanded(parts, order - shift)
        found.append(Series(series.start + shift, series.coefficients))
    return found


def _component(point: SingularPoint, vector: Sequence[Series], row: int, lowest: int) -> Constant:
    size = len(vector)
    total = ZERO
    for column in range(point.size):
        factor = point.spectrum.inverse[row, column]
        if factor != 0:
            value = vector[column % size].coefficient(lowest + column // size)
            total = total + value * Fraction(int(factor.p), int(factor.q))
    return total


def lowest_order(solution: CornerSolution, shifts: Sequence[int]) -> int:
    """A power of eps below which no coefficient of the rescaled masters can begin."""
    return min(
        (
            eps_valuation(factor * rational) + shift
            for item in solution.classes
            for matrix in item.terms
            for row, shift in zip(matrix, shifts, strict=True)
            for factor, value in zip(row, item.values, strict=True)
            for rational, _ in value
            if factor
        ),
        default=0,
    )
