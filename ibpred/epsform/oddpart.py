"""The couplings with square roots of a system that is otherwise in epsilon-form."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from fractions import Fraction

from ibpred.epsform.blocks import Finding
from ibpred.epsform.form import EpsilonForm, Matrix, OddLetter
from ibpred.epsform.matrices import Constants, inverse, product
from ibpred.epsform.oddletters import fit_odd
from ibpred.epsform.places import Place, places_of
from ibpred.epsform.tags import Tag, canonical, difference, root_class
from ibpred.exact.rational import Rational, Ring

OddTerms = list[tuple[Tag, Rational, Constants]]
"""Roots, polynomial P and matrix of each odd letter."""


def odd_part(
    coupled: Mapping[str, Matrix],
    constant: Matrix,
    tags: Sequence[Tag],
    places: Sequence[Place],
    ring: Ring,
    primes: Sequence[int],
    seed: int,
) -> OddTerms | Finding:
    """The odd letters and their matrices.

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
    found: OddTerms = []
    size = len(tags)
    for components in entries.values():
        i, j = next(iter(components))
        roots = difference(tags[i], tags[j])
        fit = fit_odd(components, roots, tuple(letters.values()), ring, primes, seed)
        if fit is None:
            text = "*".join(f"({root})" for root in roots)
            return Finding(
                f"the couplings with the root sqrt({text}) are in eps-factorised form, but no combination of "
                "logarithms of (P - root)/(P + root), with P^2 - root^2 a product of the letters, gives them",
                (),
            )
        for k, polynomial in enumerate(fit.polynomials):
            matrix = tuple(
                tuple(fit.coefficients[i, j][k] if (i, j) in components else Fraction(0) for j in range(size))
                for i in range(size)
            )
            found.append((roots, polynomial, matrix))
    return found


def _all_places(values: Sequence[Rational], ring: Ring, names: Mapping[str, Matrix]) -> list[Place]:
    return [p for name in names for p in places_of(values, ring, name)]


def _factored(
    coupled: Mapping[str, Matrix], constant: Matrix, tags: Sequence[Tag], ring: Ring
) -> dict[str, dict[tuple[int, int], dict[str, Rational]]]:
    """``C^-1 A C / eps`` where the tags differ: by root, coupling and ratio."""
    eps, size = ring.variable("eps"), len(tags)
    if all(tag == tags[0] for tag in tags):
        return {}
    back = inverse(constant, ring)
    entries: dict[str, dict[tuple[int, int], dict[str, Rational]]] = {}
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


def with_roots(form: EpsilonForm, tags: Sequence[Tag], odd: OddTerms) -> EpsilonForm:
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
