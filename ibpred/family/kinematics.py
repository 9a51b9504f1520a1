"""Kinematics: mass dimensions, and the scalar products of the external momenta from equations."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from itertools import combinations_with_replacement

from ibpred.exact.rational import Polynomial, Rational, Ring
from ibpred.family.momenta import Form, Term

_TRACER = "#"


class ContradictionError(Exception):
    """Equations (0-based numbers, ascending) that together leave ``relation = 0`` among the invariants."""

    def __init__(self, equations: tuple[int, ...], relation: Rational) -> None:
        super().__init__(f"{relation} = 0")
        self.equations = equations
        self.relation = relation


class UndeterminedError(Exception):
    """Scalar products that the equations leave open."""

    def __init__(self, products: tuple[tuple[str, str], ...]) -> None:
        super().__init__(", ".join("*".join(product) for product in products))
        self.products = products


def dimension_of(value: Rational, dimensions: Mapping[str, int]) -> int | None:
    """Mass dimension of a nonzero element of the kinematic field; None where its terms disagree."""
    above = _dimension(value.numerator, value.ring, dimensions)
    below = _dimension(value.denominator, value.ring, dimensions)
    return None if above is None or below is None else above - below


def _dimension(polynomial: Polynomial, ring: Ring, dimensions: Mapping[str, int]) -> int | None:
    found = {
        sum(int(e) * dimensions[name] for e, name in zip(exponents, ring.names, strict=True))
        for exponents in polynomial.to_dict()
    }
    return found.pop() if len(found) == 1 else None


def dimensions_in(form: Form, dimensions: Mapping[str, int]) -> dict[str, int | None]:
    """Mass dimension of every term of a form, by the text of the term.

    Parameters
    ----------
    dimensions
        Of all momenta and invariants.
    """
    found: dict[str, int | None] = {}
    for term, coefficient in form.terms.items():
        own = dimension_of(coefficient, dimensions)
        text = "*".join([*([] if coefficient.is_one() and term else [f"({coefficient})"]), *term])
        found[text] = None if own is None else own + sum(dimensions[name] for name in term)
    return found


def dimension_text(found: Mapping[str, int | None]) -> str:
    """What `dimensions_in` found, as a sentence for messages."""
    parts = [f"{term} has {'several' if n is None else n}" for term, n in found.items()]
    return ", ".join(parts)


def solve_gram(
    external: Sequence[str], equations: Sequence[Form], ring: Ring
) -> tuple[tuple[Rational, ...], ...]:
    """The matrix of the scalar products of the external momenta.

    Parameters
    ----------
    external
        Names of the independent external momenta.
    equations
        Each stands for ``form = 0`` and is linear in the scalar products.

    Raises
    ------
    ContradictionError
        At the first equation that leaves a relation among invariants.
    UndeterminedError
        If products stay open.
    """
    products = list(combinations_with_replacement(external, 2))
    solved: dict[Term, dict[Term, Rational]] = {}  # product -> what it equals
    for number, equation in enumerate(equations):
        # the tracer remembers which equations a row is made of; it is never a pivot
        row = _substituted({**equation.terms, (_TRACER, str(number)): ring.one}, solved)
        pivot = next((product for product in products if product in row), None)
        if pivot is None:
            if row.get((), ring.zero):
                used = tuple(sorted(int(term[1]) for term in row if term[:1] == (_TRACER,)))
                raise ContradictionError(used, row[()])
            continue
        head = row.pop(pivot)
        rest = {term: -value / head for term, value in row.items()}
        for other, earlier in solved.items():
            solved[other] = _substituted(earlier, {pivot: rest})
        solved[pivot] = rest
    undetermined = [p for p in products if p not in solved or any(term in products for term in solved[p])]
    if undetermined:
        raise UndeterminedError(tuple(undetermined))

    def value(a: str, b: str) -> Rational:
        product = (a, b) if (a, b) in solved else (b, a)
        return solved[product].get((), ring.zero)

    return tuple(tuple(value(a, b) for b in external) for a in external)


def _substituted(
    row: Mapping[Term, Rational], solved: Mapping[Term, Mapping[Term, Rational]]
) -> dict[Term, Rational]:
    result: dict[Term, Rational] = {}
    for term, value in row.items():
        image = {inner: value * c for inner, c in solved[term].items()} if term in solved else {term: value}
        for inner, part in image.items():
            result[inner] = result[inner] + part if inner in result else part
    return {term: value for term, value in result.items() if value}
