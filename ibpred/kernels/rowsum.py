"""A dense row that collects multiples of sparse rows, with the set of its columns.

The functions get pointers and are inlined by the compiler.
"""

from __future__ import annotations

from typing import Any

from numba import njit

from ibpred.kernels.arithmetic import multiply
from ibpred.kernels.columns import insert
from ibpred.kernels.numbering import UNIT, canonical


@njit(cache=True)
def accumulate(
    work: Any, present: Any, bottom: Any, middle: Any, top: Any, target: Any, term: Any, p: Any, half: Any
) -> Any:
    """Add a balanced residue to a column; 1 if the column is new to the row, else 0."""
    if present[target]:
        total = work[target] + term
        if total > half:
            total -= p
        elif total < -half:
            total += p
        work[target] = total
        return 0
    work[target] = term
    present[target] = 1
    insert(bottom, middle, top, target)
    return 1


@njit(cache=True)
def accumulate_product(
    work: Any,
    present: Any,
    head: Any,
    bottom: Any,
    middle: Any,
    top: Any,
    item_left: Any,
    item_right: Any,
    item_next: Any,
    value: Any,
    item: Any,
    target: Any,
    node: Any,
    other: Any,
    p: Any,
    inverse_p: Any,
) -> None:
    """Add the product of two numbered values to a column at both points, and note it as an item.

    A factor one is left out of the item; `node` alone is added where `other` is `UNIT`.
    """
    r0, r1 = value[2 * node], value[2 * node + 1]
    item_left[item] = UNIT
    item_right[item] = node
    if other != UNIT:
        y0, y1 = value[2 * other], value[2 * other + 1]
        if r0 == 1.0 and r1 == 1.0:
            item_right[item] = other
        elif y0 != 1.0 or y1 != 1.0:
            item_left[item] = node
            item_right[item] = other
        r0 = multiply(r0, y0, p, inverse_p)
        r1 = multiply(r1, y1, p, inverse_p)
    if present[target]:
        r0 += work[2 * target]
        r1 += work[2 * target + 1]
        item_next[item] = head[target]
    else:
        present[target] = 1
        insert(bottom, middle, top, target)
        item_next[item] = -1
    work[2 * target] = canonical(r0, p)
    work[2 * target + 1] = canonical(r1, p)
    head[target] = item
