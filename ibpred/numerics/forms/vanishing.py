"""Coefficients that vanish exactly, decided without numbers.

The canonical functions are ``f^(k) = sum_w A_w1 ... A_wj c^(k-j) I_w(x)`` over words w of length j <= k
(Chen's iterated integrals; letters from the outermost integration inwards). A combination of them is zero
if the exact constant in front of every word is zero. A ball that holds zero proves nothing; this does.
"""

from __future__ import annotations

from collections.abc import Sequence

from ibpred.iterated.constants.constants import ZERO, Constant
from ibpred.iterated.constants.series import laurent
from ibpred.numerics.forms.canonical import SparseRows
from ibpred.numerics.forms.masters import Row

Layer = dict[tuple[int, ...], dict[int, Constant]]
"""word -> row -> its constant, for one order in eps."""


def word_layers(matrices: Sequence[SparseRows], constants: Sequence[Sequence[Constant]]) -> list[Layer]:
    """The canonical functions as combinations of words, one layer an order."""
    layers: list[Layer] = []
    for vector in constants:
        layer: Layer = {(): {row: c for row, c in enumerate(vector) if c}}
        for word, inner in layers[-1].items() if layers else ():
            for index, rows in enumerate(matrices):
                image: dict[int, Constant] = {}
                for row, entries in rows:
                    total = ZERO
                    for column, value in entries:
                        if column in inner:
                            total = total + inner[column] * value
                    if total:
                        image[row] = total
                if image:
                    layer[index, *word] = image
        layers.append(layer)
    return layers


def vanishes(
    row: Row,
    matrices: Sequence[SparseRows],
    constants: Sequence[Sequence[Constant]],
    start: int,
    power: int,
) -> bool:
    """Whether the coefficient of ``eps^power`` of ``sum_j entries[j] f_j`` vanishes word by word.

    This is the coefficient of the integral at ``y_u = 1``; where all lower powers vanish too, it is the
    leading one for any unit.

    Parameters
    ----------
    matrices
        One for each letter.
    constants, start
        Exact boundary constants from ``eps^start`` on, far enough for this power.
    """
    factors: list[tuple[int, int, Constant]] = []  # (order, column, factor)
    for column, entry in enumerate(row.entries):
        if not entry:
            continue
        series = laurent(entry, power - start)
        for i, factor in enumerate(series.coefficients):
            order = power - series.start - i - start
            if factor and order >= 0:
                factors.append((order, column, factor))
    if not factors:
        return True
    layers = word_layers(matrices, constants[: 1 + max(order for order, _, _ in factors)])
    totals: dict[tuple[int, ...], Constant] = {}
    for order, column, exact in factors:
        for word, inner in layers[order].items():
            if column in inner:
                totals[word] = totals.get(word, ZERO) + exact * inner[column]
    return not any(totals.values())
