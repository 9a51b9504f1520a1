"""An epsilon-form with periods as functions, for an irreducible block with a maximal unipotent point.

At a point of maximal unipotent monodromy t = 0 the Picard-Fuchs operator at eps = 0 is a chain of derivations
made of the holomorphic period psi_0 and power series a_1, ..., a_(n-1) (see `frobenius`). In the basis

    E_0 = psi/psi_0,   E_k = (1/a_k) theta E_(k-1),   scaled by eps^-k,   theta = t d/dt,

the system for generic eps differs from ``eps N`` (a_k above the diagonal) by a last row with powers of eps
from -(n-2) to 1. The powers below 1 are removed one after the other, lowest first, by changes of basis that
are integrals of known functions: the result is ``theta M = eps B(t) M`` (Adams, Weinzierl, arXiv:1802.05020,
for n = 2; Pögel, Wang, Weinzierl, arXiv:2212.08908, for the equal-mass bananas of any order).
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from math import lcm

import flint

from ibpred.epsform.form import Numbers, PeriodForm
from ibpred.epsform.obstructions.cyclic import Cyclic
from ibpred.epsform.obstructions.frobenius import chain
from ibpred.epsform.obstructions.operators import LocalExponents, maximal_points
from ibpred.epsform.obstructions.power_series import Series, expansion, integral, inverse, theta, times
from ibpred.exact.rational import Rational

SeriesMatrix = list[list[Series]]
Graded = dict[int, SeriesMatrix]
"""Power of eps -> matrix of power series."""


def period_form(found: Cyclic, length: int) -> PeriodForm | None:
    """The form at the first point of maximal unipotent monodromy, through ``t^(length-1)``.

    Parameters
    ----------
    found
        The function psi and its operator for generic eps.
    length
        Terms of the power series.

    Returns
    -------
    form or None
        None where there is no such point, or the powers of eps of the operator are not those of a
        function of uniform weight (the coefficient of theta^k must have degree n - k in eps at most).
    """
    for point in maximal_points(found.at_zero):
        lower = _theta_form(found, point)
        if lower is not None:
            return _at_point(found, point, lower, length)
    return None


def _coordinate(point: LocalExponents, name: str) -> tuple[str, Fraction | None]:
    if point.place is None:
        return f"1/{name}", None
    root = point.place.root
    assert root is not None
    sign = "-" if root > 0 else "+"
    return (name if root == 0 else f"{name}{sign}{abs(root)}"), root


def _theta_form(found: Cyclic, point: LocalExponents) -> list[dict[int, Rational]] | None:
    """``p_k`` by powers of eps, the exponent split off, x standing for t."""
    equation = found.operator
    field, name, size = equation.ring, equation.name, equation.order
    if point.place is not None and point.place.root is None:
        return None
    t = field.variable(name)
    root = None if point.place is None else point.place.root
    image = 1 / t if root is None else t + root
    exponent = point.exponents[0]
    # D^k = t^-k z(z-1)...(z-k+1), or (-t)^k z(z+1)...(z+k-1) at infinity, with z = theta + exponent
    step = 1 if root is None else -1
    prefactor = -t if root is None else 1 / t
    totals = [field.zero] * (size + 1)
    product: list[Fraction] = [Fraction(1)]
    for k, c in enumerate(equation.coefficients):
        moved = c.substitute({name: image}) * prefactor**k
        for j, factor in enumerate(product):
            totals[j] = totals[j] + moved * factor
        shift = exponent + step * k
        product = [
            (product[j - 1] if j else Fraction(0)) + (product[j] * shift if j < len(product) else Fraction(0))
            for j in range(len(product) + 1)
        ]
    values = [total / totals[-1] for total in totals[:-1]]
    parts = []
    for k, value in enumerate(values):
        by_eps = _by_eps(value)
        if by_eps is None or max(by_eps, default=0) > size - k:
            return None
        if any(part and part.substitute({name: 0}) for power, part in by_eps.items() if power < size - k):
            return None
        parts.append(by_eps)
    return parts


def _by_eps(value: Rational) -> dict[int, Rational] | None:
    """Coefficients of a polynomial in eps with rational coefficients; None for anything else."""
    ring = value.ring
    index = ring.index("eps")
    if value.denominator.degrees()[index]:
        return None
    tables: dict[int, dict[tuple[int, ...], int]] = {}
    for exponents, coefficient in value.numerator.to_dict().items():
        rest = [int(e) for e in exponents]
        power, rest[index] = rest[index], 0
        tables.setdefault(power, {})[tuple(rest)] = coefficient
    return {p: ring.fraction(ring.context.from_dict(t), value.denominator) for p, t in tables.items()}


def _at_point(
    found: Cyclic, point: LocalExponents, lower: Sequence[dict[int, Rational]], length: int
) -> PeriodForm:
    name, size = found.operator.name, len(lower)
    zero = flint.fmpq_poly([0])
    series = [{p: expansion(v, name, length) for p, v in part.items()} for part in lower]
    links = chain([part.get(0, zero) for part in series], length)
    matrix = _scaled_system(series, links.period, links.kernels, length)
    gauge: Graded = {0: _unit(size)}
    while (lowest := min((p for p, m in matrix.items() if _nonzero(m)), default=1)) < 1:
        step = [[integral(-e) for e in row] for row in matrix[lowest]]
        matrix = _gauged(matrix, lowest, step, length)
        gauge = _product(_forward(lowest, step), gauge, length)
    leading = _leading(found, point)
    whole, gauge = _without_square(matrix[1], gauge, links.period, leading, length)
    coordinate, _ = _coordinate(point, name)
    text = point.text(name)
    return PeriodForm(
        found.row,
        text,
        coordinate,
        point.exponents[0],
        _numbers(links.period),
        tuple(_numbers(k) for k in links.kernels),
        tuple(
            (p, tuple(tuple(_numbers(e) for e in row) for row in m))
            for p, m in sorted(gauge.items())
            if _nonzero(m)
        ),
        tuple(tuple(_numbers(e) for e in row) for row in whole),
        tuple(
            (i, j, " + ".join(_closed_text(p, leading, e) for e, p in recognised.items()))
            for i, row in enumerate(whole)
            for j, entry in enumerate(row)
            if entry and (recognised := _recognised(entry, links.period, leading, length))
        ),
    )


def _numbers(value: Series) -> Numbers:
    return tuple(Fraction(int(c.p), int(c.q)) for c in value.coeffs())


def _unit(size: int) -> SeriesMatrix:
    return [[flint.fmpq_poly([int(i == j)]) for j in range(size)] for i in range(size)]


def _nonzero(matrix: SeriesMatrix) -> bool:
    return any(bool(e) for row in matrix for e in row)


def _scaled_system(
    lower: Sequence[dict[int, Series]], period: Series, kernels: Sequence[Series], length: int
) -> Graded:
    """The system of ``eps^-k E_k``."""
    size, zero = len(lower), flint.fmpq_poly([0])
    # theta^k psi = sum_j weights[k][j] E_j
    weights = [[period, *([zero] * (size - 1))]]
    for _ in range(1, size):
        before = weights[-1]
        weights.append(
            [
                theta(before[j]) + (times(before[j - 1], kernels[j - 1], length) if j else zero)
                for j in range(size)
            ]
        )
    head = inverse(weights[-1][-1], length)
    found: Graded = {1: [[zero] * size for _ in range(size)]}
    for j, kernel in enumerate(kernels):
        found[1][j][j + 1] = kernel
    for k, part in enumerate(lower):
        for power, p in part.items():
            if power == 0:
                continue
            for j in range(k + 1):
                # eps^power E_j in the equation of E_(n-1)
                order = power + j - (size - 1)
                table = found.setdefault(order, [[zero] * size for _ in range(size)])
                term = times(times(p, weights[k][j], length), head, length)
                table[-1][j] = table[-1][j] - term
    return found


def _product(left: Graded, right: Graded, length: int) -> Graded:
    size, zero = len(next(iter(left.values()))), flint.fmpq_poly([0])
    found: Graded = {}
    for p, a in left.items():
        for q, b in right.items():
            table = found.setdefault(p + q, [[zero] * size for _ in range(size)])
            for i in range(size):
                for k in range(size):
                    if not a[i][k]:
                        continue
                    for j in range(size):
                        if b[k][j]:
                            table[i][j] = table[i][j] + times(a[i][k], b[k][j], length)
    return found


def _forward(order: int, step: SeriesMatrix) -> Graded:
    """``1 + eps^order X``."""
    unit = _unit(len(step))
    return {0: unit, order: step} if order else {0: _sum(unit, step)}


def _gauged(matrix: Graded, order: int, step: SeriesMatrix, length: int) -> Graded:
    """The system of ``(1 + eps^order X) E``, X strictly lower triangular."""
    size = len(step)
    forward = _forward(order, step)
    slope: Graded = {order: [[theta(e) for e in row] for row in step]}
    back: Graded = {0: _unit(size)}
    power: Graded = {0: _unit(size)}
    for _ in range(size - 1):
        power = _product(power, {order: [[-e for e in row] for row in step]}, length)
        for p, m in power.items():
            back[p] = _sum(back[p], m) if p in back else m
    whole = _product(forward, matrix, length)
    for p, m in slope.items():
        whole[p] = _sum(whole[p], m) if p in whole else m
    return _product(whole, back, length)


def _sum(left: SeriesMatrix, right: SeriesMatrix) -> SeriesMatrix:
    return [[a + b for a, b in zip(x, y, strict=True)] for x, y in zip(left, right, strict=True)]


def _leading(found: Cyclic, point: LocalExponents) -> Series:
    """The leading coefficient of the operator in t without its zero at t = 0, as a polynomial."""
    top = found.at_zero.coefficients[-1]
    t = top.ring.variable(found.operator.name)
    root = None if point.place is None else point.place.root
    moved = top.substitute({found.operator.name: 1 / t if root is None else t + root})
    index = top.ring.index(found.operator.name)
    table = {int(e[index]): int(c) for e, c in moved.numerator.to_dict().items()}
    least = min(table)
    return flint.fmpq_poly([table.get(k, 0) for k in range(least, max(table) + 1)])


_POWERS = (-2, 0, 2, 4)
"""Powers of psi_0 that entries are tried to be made of."""
_DEGREE = 6
_SPARE_TERMS = 10


def _recognised(entry: Series, period: Series, leading: Series, length: int) -> dict[int, Series] | None:
    """Polynomials P_e with ``entry = sum_e P_e / leading^2 * psi_0^e`` as far as the series are known."""
    unknowns = len(_POWERS) * (_DEGREE + 1)
    if unknowns + _SPARE_TERMS > length:
        return None
    back = inverse(period, length)
    target = times(times(entry, leading, length), leading, length)
    columns = []
    for e in _POWERS:
        power = flint.fmpq_poly([1])
        for _ in range(abs(e)):
            power = times(power, period if e > 0 else back, length)
        columns += [times(power, flint.fmpq_poly([0] * d + [1]), length) for d in range(_DEGREE + 1)]
    rows = [[c[k] for c in columns] + [target[k]] for k in range(length)]
    reduced, rank = flint.fmpq_mat(length, unknowns + 1, [v for row in rows for v in row]).rref()
    solution = [flint.fmpq(0)] * unknowns
    for i in range(rank):
        pivot = next(j for j in range(unknowns + 1) if reduced[i, j] != 0)
        if pivot == unknowns:
            return None
        solution[pivot] = reduced[i, unknowns]
    found = {}
    for k, e in enumerate(_POWERS):
        above = flint.fmpq_poly(solution[k * (_DEGREE + 1) : (k + 1) * (_DEGREE + 1)])
        if above:
            found[e] = above
    return found


def _without_square(
    matrix: SeriesMatrix, gauge: Graded, period: Series, leading: Series, length: int
) -> tuple[SeriesMatrix, Graded]:
    """For n = 2 the integration constant for which B_11 is free of ``psi_0^-2``, where there is one."""
    if len(matrix) != 2:
        return matrix, gauge
    own, link = (_recognised(matrix[0][j], period, leading, length) for j in range(2))
    if own is None or link is None or -2 not in own or -2 not in link:
        return matrix, gauge
    ratio = own[-2][own[-2].degree()] / link[-2][link[-2].degree()]
    if own[-2] != link[-2] * ratio:
        return matrix, gauge
    step = [[flint.fmpq_poly([0])] * 2, [flint.fmpq_poly([ratio]), flint.fmpq_poly([0])]]
    return _gauged({1: matrix}, 0, step, length)[1], _product(_forward(0, step), gauge, length)


def _closed_text(above: Series, leading: Series, e: int) -> str:
    power = 2
    while power and above % leading == 0:
        above, power = above // leading, power - 1
    scale = lcm(*(int(c.q) for c in above.coeffs()))
    factor = _polynomial_text(above * scale)
    text = factor if above.degree() == 0 and factor.lstrip("-").isdigit() else f"({factor})"
    below = [str(scale)] if scale != 1 else []
    if power:
        below.append(f"({_polynomial_text(leading)})" + (f"^{power}" if power > 1 else ""))
    if below:
        text += f"/{below[0]}" if len(below) == 1 else f"/({'*'.join(below)})"
    if e:
        text += f"*psi0^{e}"
    return text


def _polynomial_text(value: Series) -> str:
    """A polynomial in t with integer coefficients, the highest power first."""
    text = ""
    for k in range(value.degree(), -1, -1):
        number = int(value[k].p)
        if not number:
            continue
        symbol = "" if k == 0 else "t" if k == 1 else f"t^{k}"
        size = str(abs(number)) if abs(number) != 1 or not symbol else ""
        sign = "-" if number < 0 else "+" if text else ""
        text += sign + "*".join(part for part in (size, symbol) if part)
    return text
