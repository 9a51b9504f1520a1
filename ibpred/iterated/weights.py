"""The bound on the weight: eps^k of L-loop integrals in four dimensions has weight at most 2L + k."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

from ibpred.epsform.form import Matrix
from ibpred.exact.rational import Rational
from ibpred.iterated.constants.generators import Monomial, monomial_weight
from ibpred.iterated.constants.series import eps_valuation
from ibpred.iterated.solution import Function, Product, Solution, length


@dataclass(frozen=True)
class Excess:
    """A coefficient of a master whose weight is beyond the bound.

    Attributes
    ----------
    row
        The master.
    order
        The power of eps.
    weight, bound
        Its highest weight and the bound.
    """

    row: int
    order: int
    weight: int
    bound: int


def weight_excesses(transformation: Matrix, solution: Solution, loops: int) -> tuple[Excess, ...]:
    """All coefficients of the masters ``I = T f`` whose weight is beyond ``2 L + k``; there should be none.

    Parameters
    ----------
    transformation
        T, in eps and the ratios.
    solution
        The canonical functions.
    loops
        L.

    Notes
    -----
    Cancellations between canonical functions are taken into account: the coefficient of each word and
    monomial of constants is formed as a rational function.
    """
    bound, start, orders = 2 * loops, solution.start, solution.orders
    weighed = [[_weighed(function) for function in functions] for functions in orders]
    last = start + len(orders) - 1
    found = []
    for i, row in enumerate(transformation):
        totals: dict[tuple[int, Product, Monomial], Rational] = {}
        # beyond this order some canonical function has stopped
        complete = last + min(eps_valuation(entry) for entry in row if entry)
        for j, entry in enumerate(row):
            if not entry:
                continue
            lowest = eps_valuation(entry)
            for k in range(len(orders)):
                n = start + k
                # in eps^(n + m) of the master the bound is 2 L + n + m
                terms = {key: value for key, value in weighed[k][j].items() if key[0] > bound + n + lowest}
                if not terms:
                    continue
                most = max(key[0] for key in terms) - bound - n - lowest
                count = min(most, complete - n - lowest + 1)
                for m, coefficient in enumerate(_laurent(entry, lowest, count)):
                    for (weight, word, monomial), value in terms.items():
                        if weight > bound + n + lowest + m and coefficient:
                            place = n + lowest + m, word, monomial
                            more = coefficient * value
                            totals[place] = totals[place] + more if place in totals else more
        worst: dict[int, int] = {}
        for (order, word, monomial), total in totals.items():
            if total:
                weight = length(word) + monomial_weight(monomial)
                worst[order] = max(weight, worst.get(order, 0))
        found += [Excess(i, order, weight, bound + order) for order, weight in sorted(worst.items())]
    return tuple(found)


def _weighed(function: Function) -> dict[tuple[int, Product, Monomial], Fraction]:
    """All terms by weight, word and monomial of constants."""
    return {
        (length(word) + monomial_weight(monomial), word, monomial): value
        for word, constant in function
        for monomial, value in constant.terms()
    }


def _laurent(entry: Rational, lowest: int, count: int) -> list[Rational]:
    """The first coefficients of a function of eps and the ratios, expanded in eps."""
    eps = entry.ring.variable("eps")
    rest = entry / eps**lowest
    found = []
    for _ in range(max(count, 0)):
        first = rest.substitute({"eps": 0})
        found.append(first)
        rest = (rest - first) / eps
    return found
