"""What a reconstruction will take: degrees, terms, primes and samples, known before the long part."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Protocol


@dataclass(frozen=True)
class Plan:
    """What is known once degrees and denominators are.

    Attributes
    ----------
    variables
        Names of the variables.
    entries, distinct
        Number of functions, and of different ones.
    degrees
        Largest total degrees of a numerator and of a denominator.
    terms
        Monomials that the largest numerator may have after its known factors are removed.
    primes
        Primes that the coefficients need, from the size of the functions at a small point.
    samples
        Samples expected in all; fewer if numerators turn out sparse.
    """

    variables: tuple[str, ...]
    entries: int
    distinct: int
    degrees: tuple[int, int]
    terms: int
    primes: int
    samples: int

    def text(self) -> str:
        """One line for whoever waits."""
        names = f"{len(self.variables)} variable{'s' * (len(self.variables) != 1)}"
        names += f" ({', '.join(self.variables)})" if self.variables else ""
        primes = f"{self.primes} prime{'s' * (self.primes != 1)}"
        return (
            f"{names}, {self.distinct} distinct functions of {self.entries}, degrees up to "
            f"{self.degrees[0]}/{self.degrees[1]}, numerators of up to {self.terms} terms, {primes}, "
            f"{self.samples} samples at most"
        )


class Watch(Protocol):
    """Told how a reconstruction proceeds."""

    def samples(self, step: str, done: int, expected: int | None) -> None:
        """`done` samples are taken, the present step is `step`, `expected` may be needed in all."""
        ...

    def plan(self, plan: Plan, done: int) -> None:
        """Degrees and denominators are known; `done` samples were needed for them."""
        ...


class Unwatched:
    """Nobody is told."""

    def samples(self, step: str, done: int, expected: int | None) -> None:
        """Say nothing."""

    def plan(self, plan: Plan, done: int) -> None:
        """Say nothing."""


UNWATCHED: Watch = Unwatched()
"""The default."""
