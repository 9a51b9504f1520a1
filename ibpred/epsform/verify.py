"""The evidence: substitution of an epsilon-form into its differential system."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from itertools import combinations
from random import Random

import flint

from ibpred.epsform.form import Connection, EpsilonForm, Matrix
from ibpred.epsform.matrices import (
    Constants,
    added,
    derivative,
    identity,
    lifted,
    product,
    scaled,
    subtracted,
    vanishes,
)
from ibpred.epsform.roots.oddletters import logarithmic
from ibpred.epsform.roots.tags import Tag, between_rationals, canonical, difference, product_of
from ibpred.exact.rational import Rational, Ring


def canonical_matrix(
    residues: Mapping[str, Constants], logarithms: Mapping[str, Rational], size: int, ring: Ring
) -> Matrix:
    """``eps sum_l R_l dlog(letter_l)/dx`` over the field.

    Parameters
    ----------
    residues
        R_l by the text of the letter.
    logarithms
        dlog(letter)/dx by the same texts.
    """
    total: Matrix = tuple((ring.zero,) * size for _ in range(size))
    eps = ring.variable("eps")
    for text, constants in residues.items():
        total = added(total, scaled(lifted(ring, constants), eps * logarithms[text]))
    return total


def satisfies(matrix: Matrix, transformation: Matrix, canonical: Matrix, name: str, ring: Ring) -> bool:
    """Whether ``A T - dT/dx = T B`` holds exactly."""
    left = subtracted(product(matrix, transformation, ring), derivative(transformation, name))
    return vanishes(subtracted(left, product(transformation, canonical, ring)))


def form_tags(form: EpsilonForm) -> tuple[Tag, ...]:
    """The factors under the square root of each function."""
    return tuple(tuple(form.radicands[k] for k in tag) for tag in form.tags)


def rational_system(form: EpsilonForm, name: str) -> Matrix | None:
    """The matrix of the equation in one ratio for ``T^-1 I``: the canonical one without the square roots.

    Returns
    -------
    matrix or None
        None where a matrix of the form connects functions whose roots do not fit the letter.
    """
    ring, size = form.ring, len(form.transformation)
    tags = form_tags(form)
    residues = {str(letter): matrix for letter, matrix in zip(form.letters, form.matrices, strict=True)}
    logarithms = {str(letter): letter.derivative(name) / letter for letter in form.letters}
    total = canonical_matrix(residues, logarithms, size, ring)
    if not _fits(form.matrices, tags, ()):
        return None
    for letter, matrix in zip(form.odd_letters, form.odd_matrices, strict=True):
        roots = tuple(form.radicands[k] for k in letter.roots)
        if not _fits((matrix,), tags, canonical(roots)):
            return None
        log = logarithmic(letter.polynomial, product_of(roots, ring), name)
        total = added(total, canonical_matrix({"": matrix}, {"": log}, size, ring))
    return between_rationals(total, tags, name, ring)


def _fits(matrices: Sequence[Constants], tags: Sequence[Tag], roots: Tag) -> bool:
    return not any(
        value and difference(tags[i], tags[j]) != roots
        for matrix in matrices
        for i, row in enumerate(matrix)
        for j, value in enumerate(row)
    )


def verify(connection: Connection, form: EpsilonForm) -> bool:
    """Whether a form is an epsilon-form of the connection, by exact substitution.

    Checks for every variable x that ``(T D)^-1 (A T D - d(T D)/dx)`` is the canonical matrix, in the
    equivalent form without square roots, and that the inverse given is the inverse, over Q(eps, ratios).
    """
    ring, size = connection.ring, len(connection.labels)
    if form.ring is not ring or form.variables != connection.variables:
        return False
    unit = identity(ring, size)
    if not vanishes(subtracted(product(form.transformation, form.inverse, ring), unit)):
        return False
    for name in connection.variables:
        system = rational_system(form, name)
        if system is None:
            return False
        if not satisfies(connection.matrices[name], form.transformation, system, name, ring):
            return False
    return True


def is_integrable(form: EpsilonForm) -> bool:
    """Whether the canonical system is integrable, exactly: ``dA = A wedge A`` in all pairs of ratios."""
    ring = form.ring
    systems = {name: rational_system(form, name) for name in form.variables}
    for x, y in combinations(form.variables, 2):
        a, b = systems[x], systems[y]
        if a is None or b is None:
            return False
        crossed = subtracted(derivative(a, y), derivative(b, x))
        bracket = subtracted(product(a, b, ring), product(b, a, ring))
        if not vanishes(added(crossed, bracket)):
            return False
    return True


def verify_modular(connection: Connection, form: EpsilonForm, prime: int, seed: int, points: int = 2) -> bool:
    """The same identity at random points modulo a prime: quick, wrong with probability about 1/prime.

    Parameters
    ----------
    prime
        Larger than 2^30, so that chance is excluded.
    seed
        Of the points.
    points
        Number of points.
    """
    if form.ring is not connection.ring or form.variables != connection.variables:
        return False
    random = Random(seed)
    size = len(connection.labels)
    unit = flint.nmod_mat(size, size, [int(i == j) for i in range(size) for j in range(size)], prime)
    systems = {name: rational_system(form, name) for name in connection.variables}
    left_to_try = 20
    while points:
        values = [random.randrange(1, prime) for _ in connection.ring.names]
        try:
            good = all(
                system is not None and _holds_at(connection, form, system, name, values, unit, prime)
                for name, system in systems.items()
            )
        except ZeroDivisionError:
            left_to_try -= 1
            if left_to_try == 0:
                return False
            continue
        if not good:
            return False
        points -= 1
    return True


def _holds_at(
    connection: Connection,
    form: EpsilonForm,
    system: Matrix,
    name: str,
    values: list[int],
    unit: object,
    prime: int,
) -> bool:
    size = len(connection.labels)

    def image(matrix: Matrix) -> object:
        flat = [e.modular(values, prime) if e else 0 for row in matrix for e in row]
        return flint.nmod_mat(size, size, flat, prime)

    a, t = image(connection.matrices[name]), image(form.transformation)
    change, back = image(derivative(form.transformation, name)), image(form.inverse)
    return bool(back * t == unit and a * t - change == t * image(system))  # type: ignore[operator]
