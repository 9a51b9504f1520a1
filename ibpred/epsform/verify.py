"""The evidence: substitution of an epsilon-form into its differential system."""

from __future__ import annotations

from collections.abc import Mapping
from random import Random

import flint

from ibpred.epsform.form import Connection, EpsilonForm, Matrix
from ibpred.epsform.intertwine import modular_number
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


def verify(connection: Connection, form: EpsilonForm) -> bool:
    """Whether a form is an epsilon-form of the connection, by exact substitution.

    Checks that ``T^-1 (A T - dT/dx) = eps sum_l A_l dlog(letter_l)/dx`` for every variable x and that the
    inverse given is the inverse, over Q(eps, ratios). Forms with square roots are not supported.
    """
    if any(form.tags):
        return False
    ring, size = connection.ring, len(connection.labels)
    if form.ring is not ring or form.variables != connection.variables:
        return False
    unit = identity(ring, size)
    if not vanishes(subtracted(product(form.transformation, form.inverse, ring), unit)):
        return False
    residues = {str(letter): matrix for letter, matrix in zip(form.letters, form.matrices, strict=True)}
    for name in connection.variables:
        logarithms = {str(letter): letter.derivative(name) / letter for letter in form.letters}
        canonical = canonical_matrix(residues, logarithms, size, ring)
        if not satisfies(connection.matrices[name], form.transformation, canonical, name, ring):
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
    if any(form.tags) or form.ring is not connection.ring or form.variables != connection.variables:
        return False
    random = Random(seed)
    size = len(connection.labels)
    unit = flint.nmod_mat(size, size, [int(i == j) for i in range(size) for j in range(size)], prime)
    left_to_try = 20
    while points:
        values = [random.randrange(1, prime) for _ in connection.ring.names]
        try:
            good = all(
                _holds_at(connection, form, name, values, unit, prime) for name in connection.variables
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
    eps = values[connection.ring.index("eps")]
    total = flint.nmod_mat(size, size, prime)
    for letter, constants in zip(form.letters, form.matrices, strict=True):
        log = (letter.derivative(name) / letter).modular(values, prime)
        flat = [modular_number(value, prime) * eps * log for row in constants for value in row]
        total = total + flint.nmod_mat(size, size, [v % prime for v in flat], prime)
    return bool(back * t == unit and a * t - change == t * total)  # type: ignore[operator]
