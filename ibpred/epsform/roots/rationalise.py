"""The search for variables in which square roots of several ratios are rational.

Roots are removed one after the other, each by the parametrisation of a conic (see `conics`); of the Möbius
transformations those are kept that leave the letters simplest. The order of the variables is chosen such that
the letters are linear level by level: those of the last variable as they stand, those of the one before it
where the last one vanishes, and so on, which is how iterated integrals are written and evaluated.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from itertools import permutations

from ibpred.epsform.places import degree
from ibpred.epsform.roots.conics import (
    Step,
    as_element,
    normalisations,
    parametrised,
    square_root,
    without_squares,
)
from ibpred.exact.rational import Polynomial, Rational, Ring
from ibpred.progress import SILENT, Progress

_BEAM = 4
"""Sets of variables that are kept after each root."""
_TRIED = 60
"""Parametrisations of one conic whose letters are computed."""
_MOST_NAMES = 4
"""Variables up to which a search is worth its time."""


@dataclass(frozen=True)
class Change:
    """Variables in which square roots are rational.

    Attributes
    ----------
    steps
        The changes of single variables, one after the other.
    names
        The new variables in the order that suits the letters best.
    letters
        The irreducible factors of the letters in the new variables.
    linear
        Whether they are linear level by level.
    positive
        Whether the ratios are positive where the new variables are, each much larger than the next one.
    """

    steps: tuple[Step, ...]
    names: tuple[str, ...]
    letters: tuple[Rational, ...]
    linear: bool
    positive: bool

    @property
    def fit(self) -> bool:
        """Whether the variables serve for iterated integrals and boundary constants as well."""
        return self.linear and self.positive


@dataclass(frozen=True)
class _State:
    steps: tuple[Step, ...]
    names: tuple[str, ...]
    letters: tuple[Rational, ...]
    roots: tuple[Rational, ...]
    images: tuple[Rational, ...]


def rationalise(
    names: Sequence[str],
    letters: Sequence[Rational],
    radicands: Sequence[Rational],
    ratios: Sequence[Rational],
    progress: Progress = SILENT,
) -> Change | None:
    """Variables in which the square roots of all radicands are rational, the simplest that were found.

    Parameters
    ----------
    names
        The variables.
    letters
        Polynomials whose zeros are the singularities.
    radicands
        Polynomials in the variables.
    ratios
        Positive functions of the variables, which should stay positive and tend to zero or infinity at the
        corner of the new variables.
    progress
        Told after each parametrisation of a conic.

    Returns
    -------
    change or None
        None where some root is of degree three or more in all variables, or no rational point is found. That
        the roots are rational is checked by substitution.
    """
    if len(names) > _MOST_NAMES:
        return None
    start = _State(
        (),
        tuple(names),
        tuple(_irreducible([*letters, *radicands])),
        _open(radicands),
        tuple(ratios),
    )
    beam = [start]
    while beam and beam[0].roots:
        found: dict[tuple[str, ...], _State] = {}
        for state in beam:
            for new in _successors(state):
                found.setdefault(tuple(map(str, new.images)), new)
                progress.advance(len(found), None)
        fewest = min((len(s.roots) for s in found.values()), default=0)
        left = [s for s in found.values() if len(s.roots) == fewest]
        beam = sorted(left, key=_rank)[:_BEAM]
    if not beam:
        return None
    best = min((_ordered(state) for state in beam), key=lambda c: (not c.fit, not c.linear))
    for radicand in radicands:
        for step in best.steps:
            radicand = step.pulled(radicand)
        assert square_root(radicand) is not None
    return best


def _successors(state: _State) -> Iterator[_State]:
    """The states after one more root is rational."""
    for root in state.roots:
        for name in state.names:
            trial = fresh(state.names)
            step = parametrised(root, name, trial, state.letters)
            if step is None:
                continue
            letters = _irreducible([step.pulled(letter) for letter in state.letters])
            # the step as it is serves where letters have fewer than three zeros
            choices = {str(s.value): s for s in (step, *normalisations(step, letters))}
            for choice in sorted(choices.values(), key=lambda s: _size(s.value))[:_TRIED]:
                yield _applied(state, choice)


def fresh(names: Sequence[str]) -> str:
    """``w``, ``w2``, ``w3``, ...: the first that is not taken."""
    name, number = "w", 2
    while name in names:
        name, number = f"w{number}", number + 1
    return name


def _applied(state: _State, step: Step) -> _State:
    return _State(
        (*state.steps, step),
        tuple(step.new if name == step.old else name for name in state.names),
        tuple(_irreducible([step.pulled(letter) for letter in state.letters])),
        _open([step.pulled(root) for root in state.roots]),
        tuple(step.pulled(image) for image in state.images),
    )


def _open(radicands: Sequence[Rational]) -> tuple[Rational, ...]:
    """The radicands without squares that are not one yet, each once."""
    found: dict[str, Rational] = {}
    for radicand in radicands:
        rest = without_squares(radicand)
        if not rest.is_one():
            found[str(rest)] = rest
    return tuple(found.values())


def _irreducible(elements: Sequence[Rational]) -> list[Rational]:
    """Their irreducible factors, each once, that of a sign left out."""
    found: dict[str, Rational] = {}
    for element in elements:
        for factor, _ in element.factors()[1]:
            if factor.leading_coefficient() < 0:
                factor = -factor
            found[str(factor)] = as_element(factor, element.ring)
    return list(found.values())


def _size(value: Rational) -> tuple[int, int, int, str]:
    """How complicated an element looks."""
    parts = (value.numerator, value.denominator)
    height = sum(abs(int(c)) for part in parts for c in part.coeffs())
    return sum(int(p.total_degree()) for p in parts), sum(map(len, parts)), height, str(value)


def _rank(state: _State) -> tuple[tuple[int, ...], tuple[str, ...]]:
    change = _ordered(state)
    sizes = [_size(letter) for letter in state.letters]
    numbers = (
        (not change.positive) + 2 * (not change.linear),
        sum(_stays(image, change.names) for image in state.images),
        sum(max(abs(int(c)) for c in letter.numerator.coeffs()) > 1 for letter in state.letters),
        len(sizes),
        sum(degrees for degrees, *_ in sizes),
        sum(height for _, _, height, _ in sizes),
    )
    return numbers, tuple(map(str, state.images))


def _stays(value: Rational, names: Sequence[str]) -> bool:
    """Whether an element tends neither to zero nor to infinity at the corner of `positive_at_corner`."""

    def lowest(polynomial: Polynomial) -> tuple[int, ...]:
        places = [value.ring.index(name) for name in reversed(names)]
        return min(tuple(int(e[k]) for k in places) for e in polynomial.to_dict())

    return lowest(value.numerator) == lowest(value.denominator)


def _ordered(state: _State) -> Change:
    """The order of the variables that suits best, the given one where all are alike."""
    best: Change | None = None
    for names in permutations(state.names):
        here = Change(
            state.steps,
            names,
            state.letters,
            _linear(state.letters, names),
            all(positive_at_corner(image, names) for image in state.images),
        )
        if best is None or (here.fit, here.linear) > (best.fit, best.linear):
            best = here
    assert best is not None
    return best


def _linear(letters: Sequence[Rational], names: Sequence[str]) -> bool:
    """Whether the letters are linear level by level, as the module says."""
    here = list(letters)
    for name in reversed(names):
        field = here[0].ring if here else None
        if any(degree(letter.numerator, letter.ring, name) > 1 for letter in here):
            return False
        if field is not None:
            here = _irreducible([_lowest(letter, name) for letter in here])
    return True


def _lowest(value: Rational, name: str) -> Rational:
    """A polynomial where a variable vanishes, powers of it left out."""
    place = value.ring.index(name)
    terms = {tuple(map(int, e)): c for e, c in value.numerator.to_dict().items()}
    power = min(e[place] for e in terms)
    kept = {(*e[:place], 0, *e[place + 1 :]): c for e, c in terms.items() if e[place] == power}
    return as_element(value.ring.context.from_dict(kept), value.ring)


def positive_at_corner(value: Rational, names: Sequence[str]) -> bool:
    """Whether an element is positive where all variables are, each much larger than the next one."""

    def sign(polynomial: Polynomial, field: Ring) -> bool:
        places = [field.index(name) for name in reversed(names)]
        terms = polynomial.to_dict()
        return bool(terms[min(terms, key=lambda e: tuple(int(e[k]) for k in places))] > 0)

    return sign(value.numerator, value.ring) == sign(value.denominator, value.ring)
