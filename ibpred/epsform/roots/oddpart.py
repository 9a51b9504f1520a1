"""The couplings with square roots of a system that is otherwise in epsilon-form."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from itertools import combinations, islice, permutations

from ibpred.epsform.blocks import Finding
from ibpred.epsform.form import EpsilonForm, Matrix, OddLetter
from ibpred.epsform.matrices import Constants, inverse, product
from ibpred.epsform.places import Place, places_of
from ibpred.epsform.roots.oddletters import OddFit, fit_odd
from ibpred.epsform.roots.rationalise import positive_at_corner
from ibpred.epsform.roots.tags import Tag, canonical, difference, only_in, root_class
from ibpred.exact.rational import Rational, Ring

Entries = dict[str, dict[tuple[int, int], dict[str, Rational]]]
"""By root: the couplings in each ratio without it."""


@dataclass(frozen=True)
class OddTerms:
    """The odd letters of a system.

    Attributes
    ----------
    tags
        The tag of each row, the signs of the polynomials such that all letters are real.
    terms
        Roots, polynomial P and matrix of each odd letter.
    """

    tags: tuple[Tag, ...]
    terms: tuple[tuple[Tag, Rational, Constants], ...]


def odd_part(
    coupled: Mapping[str, Matrix],
    constant: Matrix,
    tags: Sequence[Tag],
    places: Sequence[Place],
    ring: Ring,
    primes: Sequence[int],
    seed: int,
) -> OddTerms | tuple[int, Finding]:
    """The odd letters and their matrices; a row that has none, and why.

    A function may as well carry the root of minus a polynomial, which multiplies it by i. Letters
    ``(P - sqrt Q)/(P + sqrt Q)`` with a rational P exist for one sign of Q only, so the signs are chosen for
    all roots together.

    Parameters
    ----------
    coupled
        For each ratio the couplings between the functions without the roots (see `tags`).
    constant
        The matrix C that factors eps out of them.
    tags
        The tag of each row.
    places
        The even letters.
    ring
        The ring of all these.
    primes, seed
        For the search of letters.
    """
    entries = _factored(coupled, constant, tags, ring)
    letters = {p.text(): p.element for p in places}
    for tag in tags:
        letters |= {p.text(): p.element for factor in tag for p in _all_places([1 / factor], ring, coupled)}
    for components in entries.values():
        values = [e for component in components.values() for e in component.values()]
        letters |= {p.text(): p.element for p in _all_places(values, ring, coupled)}
    known = tuple(letters.values())
    signs: dict[Tag, int] = {}
    fits: dict[Tag, OddFit] = {}
    for components in entries.values():
        i, j = next(iter(components))
        roots = difference(tags[i], tags[j])
        for sign, trial in ((1, roots), (-1, (-roots[0], *roots[1:]))):
            fit = fit_odd(components, trial, known, ring, primes, seed)
            if fit is not None:
                signs[roots], fits[roots] = sign, fit
                break
        else:
            return max(i for i, _ in components), _missing(roots)
    flipped = _flipped(signs, tuple(coupled))
    if flipped is None:
        row = max(i for components in entries.values() for i, _ in components)
        return row, _missing(next(roots for roots, sign in signs.items() if sign < 0))
    terms = []
    for components in entries.values():
        i, j = next(iter(components))
        roots = difference(tags[i], tags[j])
        fit = fits[roots]
        real = _signed(roots, flipped)
        if real != roots:
            moved = {
                (r, c): {
                    name: value * (-1) ** len(set(only_in(tags[c], tags[r])) & flipped)
                    for name, value in component.items()
                }
                for (r, c), component in components.items()
            }
            again = fit_odd(moved, real, known, ring, primes, seed)
            if again is None:
                return max(r for r, _ in components), _missing(roots)
            fit = again
        terms += [(real, polynomial, matrix) for polynomial, matrix in _matrices(fit, len(tags))]
    return OddTerms(tuple(_signed(tag, flipped) for tag in tags), tuple(terms))


def _matrices(fit: OddFit, size: int) -> list[tuple[Rational, Constants]]:
    found = []
    for k, polynomial in enumerate(fit.polynomials):
        rows = [[Fraction(0)] * size for _ in range(size)]
        for (i, j), values in fit.coefficients.items():
            rows[i][j] = values[k]
        found.append((polynomial, tuple(map(tuple, rows))))
    return found


def _missing(roots: Tag) -> Finding:
    text = "*".join(f"({root})" for root in roots)
    return Finding(
        f"the couplings with the root sqrt({text}) are in eps-factorised form, but no combination of "
        "logarithms of (P - root)/(P + root), with P^2 - root^2 a product of the letters, gives them",
        (),
    )


def _flipped(signs: Mapping[Tag, int], variables: Sequence[str]) -> frozenset[Rational] | None:
    """The polynomials whose signs are to change so that each product has the sign wanted.

    Of all such sets one is taken after which all polynomials are positive in some order of the variables in
    which they vanish, or where all variables are one, if there is such a set, else the smallest.
    """
    names = list(dict.fromkeys(factor for roots in signs for factor in roots))
    if all(sign > 0 for sign in signs.values()):
        return frozenset()
    if len(names) > _MOST_SIGNS:
        return None
    fitting = [
        frozenset(chosen)
        for size in range(len(names) + 1)
        for chosen in combinations(names, size)
        if all((-1) ** len(set(chosen) & set(roots)) == sign for roots, sign in signs.items())
    ]
    orders = list(islice(permutations(variables), _MOST_ORDERS))
    positive = [frozenset(n for n in names if not positive_at_corner(n, order)) for order in orders]
    equal = dict.fromkeys(variables, 1)
    positive.append(frozenset(n for n in names if n.substitute(equal).to_fraction() <= 0))
    return next((chosen for chosen in fitting if chosen in positive), fitting[0] if fitting else None)


_MOST_ORDERS = 720
"""Orders of the variables that are looked at."""
_MOST_SIGNS = 16
"""Polynomials under roots up to which all choices of signs are looked at."""


def _signed(tag: Tag, flipped: frozenset[Rational]) -> Tag:
    return canonical(tuple(-factor if factor in flipped else factor for factor in tag))


def _all_places(values: Sequence[Rational], ring: Ring, names: Mapping[str, Matrix]) -> list[Place]:
    return [p for name in names for p in places_of(values, ring, name)]


def _factored(coupled: Mapping[str, Matrix], constant: Matrix, tags: Sequence[Tag], ring: Ring) -> Entries:
    """``C^-1 A C / eps`` where the tags differ: by root, coupling and ratio."""
    eps, size = ring.variable("eps"), len(tags)
    if all(tag == tags[0] for tag in tags):
        return {}
    back = inverse(constant, ring)
    entries: Entries = {}
    for name, matrix in coupled.items():
        odd = tuple(
            tuple(e if tags[i] != tags[j] else ring.zero for j, e in enumerate(row))
            for i, row in enumerate(matrix)
        )
        # C connects equal tags only, so it leaves the roots apart
        whole = product(product(back, odd, ring), constant, ring)
        for i in range(size):
            for j in range(size):
                if whole[i][j]:
                    key = root_class(tags[i], tags[j])
                    row = entries.setdefault(key, {}).setdefault((i, j), dict.fromkeys(coupled, ring.zero))
                    row[name] = whole[i][j] / eps
    return entries


def with_roots(
    form: EpsilonForm, tags: Sequence[Tag], odd: Sequence[tuple[Tag, Rational, Constants]]
) -> EpsilonForm:
    """Add the roots to a form.

    Parameters
    ----------
    form
        Without roots.
    tags
        The tag of each function.
    odd
        The odd letters.
    """
    radicands = canonical(tuple(dict.fromkeys(factor for tag in tags for factor in tag)))
    return replace(
        form,
        tags=tuple(tuple(radicands.index(factor) for factor in tag) for tag in tags),
        radicands=radicands,
        odd_letters=tuple(
            OddLetter(polynomial, tuple(radicands.index(factor) for factor in roots))
            for roots, polynomial, _ in odd
        ),
        odd_matrices=tuple(matrix for _, _, matrix in odd),
    )
