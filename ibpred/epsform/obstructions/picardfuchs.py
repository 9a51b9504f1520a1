"""The Picard-Fuchs operator of a block at eps = 0."""

from __future__ import annotations

from collections.abc import Sequence

from ibpred.epsform.form import Matrix
from ibpred.epsform.matrices import dot, solve
from ibpred.epsform.obstructions.operators import Operator, operator
from ibpred.exact.rational import Rational, Ring


def picard_fuchs(block: Matrix, name: str) -> Operator | None:
    """Differential operator of one master of the block at eps = 0.

    The masters are first scaled by powers of eps so that the block is finite at eps = 0. Of the masters
    that generate the block (cyclic vectors) the one whose operator has the lowest degree is taken.

    Returns
    -------
    operator or None
        None where no scaling makes the block finite, or no master is cyclic.
    """
    limit = _limit(block)
    if limit is None:
        return None
    ring = block[0][0].ring
    found = [p for i in range(len(block)) if (p := _operator(limit, i, ring, name)) is not None]
    return min(found, key=lambda p: (p.degree(), p.text()), default=None)


def _limit(block: Matrix) -> Matrix | None:
    """The block at eps = 0 after scaling the masters by powers of eps."""
    size, ring = len(block), block[0][0].ring
    orders = {(i, j): _order(block[i][j]) for i in range(size) for j in range(size) if block[i][j]}
    # entry (i, j) is multiplied by eps^(w_j - w_i): shortest paths make all orders non-negative
    weights = [0] * size
    for _ in range(size + 1):
        changed = False
        for (i, j), order in orders.items():
            if weights[i] > weights[j] + order:
                weights[i] = weights[j] + order
                changed = True
        if not changed:
            break
    else:
        return None
    eps = ring.variable("eps")
    return tuple(
        tuple(
            (e * eps ** (weights[j] - weights[i])).substitute({"eps": 0}) if e else e
            for j, e in enumerate(row)
        )
        for i, row in enumerate(block)
    )


def _order(value: Rational) -> int:
    """Order of vanishing at eps = 0."""
    index = value.ring.index("eps")
    lowest = [min(int(e[index]) for e in p.to_dict()) for p in (value.numerator, value.denominator)]
    return lowest[0] - lowest[1]


def _operator(matrix: Matrix, start: int, ring: Ring, name: str) -> Operator | None:
    """The operator of the function `start`."""
    size = len(matrix)
    row: Sequence[Rational] = [ring.one if j == start else ring.zero for j in range(size)]
    chain = [tuple(row)]
    columns = tuple(zip(*matrix, strict=True))
    for _ in range(size):
        row = tuple(
            entry.derivative(name) + dot(ring, row, column)
            for entry, column in zip(row, columns, strict=True)
        )
        chain.append(row)
    transposed = tuple(zip(*chain[:-1], strict=True))
    try:
        combination = solve(transposed, tuple((e,) for e in chain[-1]), ring)
    except ZeroDivisionError:
        return None
    return operator([*(-row[0] for row in combination), ring.one], name)
