"""Evaluation of coefficient tables at sample points modulo a prime."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ibpred.elimination.system import CoefficientTable
from ibpred.errors import InputError
from ibpred.exact.primes import is_prime
from ibpred.kernels.arithmetic import LARGEST_PRIME, from_residues, to_residues
from ibpred.kernels.coefficients import lanes_monomials, lanes_polynomials
from ibpred.kernels.lanes import ALIGNMENT, LANES

Residues = NDArray[np.uint64]


@dataclass(frozen=True)
class TablePlan:
    """How to evaluate a coefficient table: products for the monomials, then sparse sums.

    Attributes
    ----------
    variables
        Number of variables; block v of the scratch holds variable v, the next one holds 1.
    blocks
        Blocks of scratch.
    products
        int32 (n, 3): ``block[a] = block[b] * block[c]`` in this order.
    start, monomial, value
        The polynomials in CSR form: block of each monomial (int32), integer factor (int64).
    """

    variables: int
    blocks: int
    products: NDArray[np.int32]
    start: NDArray[np.int64]
    monomial: NDArray[np.int32]
    value: NDArray[np.int64]

    @property
    def coefficients(self) -> int:
        return len(self.start) - 1


def plan_table(table: CoefficientTable) -> TablePlan:
    """The plan of a table.

    Raises
    ------
    ValueError
        If shapes disagree or an exponent is negative.
    """
    exponents = np.asarray(table.exponents, np.int64)
    values = np.asarray(table.values, np.int64)
    variables = len(table.variables)
    if exponents.ndim != 2 or exponents.shape[1] != variables:
        raise ValueError(f"exponents of shape {exponents.shape} do not fit {variables} variables")
    if values.ndim != 2 or values.shape[1] != exponents.shape[0]:
        raise ValueError(f"values of shape {values.shape} do not fit {exponents.shape[0]} monomials")
    if exponents.size and exponents.min() < 0:
        raise ValueError("a monomial of a coefficient table has a negative exponent")
    one = variables
    blocks = variables + 1
    products: list[tuple[int, int, int]] = []
    known: dict[tuple[int, ...], int] = {(0,) * variables: one}
    for v in range(variables):
        known[tuple(int(i == v) for i in range(variables))] = v

    def block_of(monomial: tuple[int, ...]) -> int:
        nonlocal blocks
        if monomial not in known:
            v = next(i for i, e in enumerate(monomial) if e)
            rest = list(monomial)
            rest[v] -= 1
            left = known[tuple(int(i == v) for i in range(variables))]
            right = block_of(tuple(rest))
            products.append((blocks, left, right))
            known[monomial] = blocks
            blocks += 1
        return known[monomial]

    places = np.array([block_of(tuple(int(e) for e in row)) for row in exponents], np.int32)
    row, where = np.nonzero(values)
    start = np.zeros(values.shape[0] + 1, np.int64)
    np.cumsum(np.bincount(row, minlength=values.shape[0]), out=start[1:])
    return TablePlan(
        variables,
        blocks,
        np.array(products, np.int32).reshape(-1, 3),
        start,
        places[where] if len(places) else np.empty(0, np.int32),
        values[row, where],
    )


def aligned_blocks(count: int) -> NDArray[np.float64]:
    """Zeros for `count` blocks of lanes, aligned for vector loads."""
    spare = ALIGNMENT // 8
    raw = np.zeros(count * LANES + spare, np.float64)
    offset = (-raw.ctypes.data % ALIGNMENT) // 8
    return raw[offset : offset + count * LANES]


def check_prime(prime: int) -> int:
    """The prime as a plain int.

    Raises
    ------
    InputError
        If it is no odd prime below 2**49.
    """
    prime = int(prime)
    if not 2 < prime < LARGEST_PRIME or not is_prime(prime):
        raise InputError(f"the engine works modulo odd primes below 2^49, not modulo {prime}")
    return prime


def check_points(points: NDArray[np.uint64], variables: int, prime: int) -> NDArray[np.float64]:
    """Sample points (variables, B) as balanced residues.

    Raises
    ------
    InputError
        If the shape does not fit the variables.
    """
    array = np.asarray(points, np.uint64)
    if array.ndim != 2 or array.shape[0] != variables:
        raise InputError(f"points of shape {array.shape} do not fit {variables} variables")
    reduced = (array % np.uint64(prime)).astype(np.int64)
    flat: NDArray[np.float64] = to_residues(np.ascontiguousarray(reduced).reshape(-1), prime)
    return flat.reshape(array.shape)


def load_points(scratch: NDArray[np.float64], points: NDArray[np.float64], first: int) -> None:
    """Put up to `LANES` points into the first blocks; spare lanes repeat the last point."""
    variables, count = points.shape
    lanes = np.minimum(np.arange(first, first + LANES), count - 1)
    view = scratch.reshape(-1, LANES)
    view[:variables] = points[:, lanes]
    view[variables] = 1.0


def evaluate_plan(plan: TablePlan, points: NDArray[np.float64], prime: int) -> NDArray[np.float64]:
    """Balanced residues (coefficients, B) of a planned table at balanced points (variables, B)."""
    count = points.shape[1]
    result = np.empty((plan.coefficients, count), np.float64)
    scratch = aligned_blocks(plan.blocks)
    target = aligned_blocks(plan.coefficients)
    factor = to_residues(plan.value, prime)
    for first in range(0, count, LANES):
        load_points(scratch, points, first)
        lanes_monomials(scratch, plan.products, float(prime))
        lanes_polynomials(scratch, plan.start, plan.monomial, factor, target, 0, float(prime))
        width = min(LANES, count - first)
        result[:, first : first + width] = target.reshape(-1, LANES)[:, :width]
    return result


def evaluate_table(table: CoefficientTable, points: NDArray[np.uint64], prime: int) -> Residues:
    """Values of all coefficients of a table at sample points.

    Parameters
    ----------
    table
        The table.
    points
        uint64 (variables, B).
    prime
        An odd prime below 2**49.

    Returns
    -------
    uint64 (coefficients, B), canonical residues.

    Raises
    ------
    InputError
        If the modulus is no such prime or the points do not fit the variables.
    """
    prime = check_prime(prime)
    plan = plan_table(table)
    values = evaluate_plan(plan, check_points(points, plan.variables, prime), prime)
    result: Residues = from_residues(values.reshape(-1), prime)
    return result.reshape(values.shape)


def point_values(table: CoefficientTable, point: Sequence[int], prime: int) -> NDArray[np.float64]:
    """Balanced residues (coefficients,) of a table at one point.

    Raises
    ------
    InputError
        If the modulus is no odd prime below 2**49 or the point does not fit the variables.
    """
    prime = check_prime(prime)
    plan = plan_table(table)
    column = np.array([[int(x) % prime] for x in point], np.uint64).reshape(len(point), 1)
    values = evaluate_plan(plan, check_points(column, plan.variables, prime), prime)
    return np.ascontiguousarray(values[:, 0])
