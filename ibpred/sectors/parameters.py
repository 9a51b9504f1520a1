"""U and F of all sectors of a family, cut out of those of the top sector."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import combinations

from ibpred.exact.labelling import CanonicalForm, Term, automorphism_generators, canonical_form
from ibpred.family.definition import FamilyDefinition
from ibpred.family.polynomials import symanzik
from ibpred.sectors.order import lines_of, sector_key


@dataclass(frozen=True)
class FamilyTerms:
    """The monomials of U and F of the sector of all propagators.

    Attributes
    ----------
    supports
        For each monomial the bit mask of the lines whose parameters occur in it.
    exponents
        For each monomial one exponent for each line of the family.
    labels
        For each monomial ``U`` or ``F`` with its coefficient.
    cut
        Bit mask of the cut lines.
    """

    supports: tuple[int, ...]
    exponents: tuple[tuple[int, ...], ...]
    labels: tuple[str, ...]
    cut: int

    def of_sector(self, sector: int) -> tuple[Term, ...]:
        """Monomials of the sector's U and F, in the parameters of its lines."""
        lines = lines_of(sector)
        return tuple(
            (tuple(exponents[i] for i in lines), label)
            for support, exponents, label in zip(self.supports, self.exponents, self.labels, strict=True)
            if not support & ~sector
        )

    def colours(self, sector: int) -> tuple[str, ...]:
        """What must agree when lines are renamed: cut lines stay cut."""
        return tuple("cut" if self.cut >> i & 1 else "" for i in lines_of(sector))

    def canonical(self, sector: int) -> CanonicalForm:
        """Canonical form of the sector's U and F under renaming of lines."""
        return canonical_form(self.of_sector(sector), self.colours(sector))

    def symmetries(self, sector: int) -> tuple[tuple[int, ...], ...]:
        """Generators of the renamings of lines (by position in the sector) that keep U and F."""
        return automorphism_generators(self.of_sector(sector), self.colours(sector))


def family_terms(family: FamilyDefinition) -> FamilyTerms:
    """Monomials of U and F of a family."""
    supports: list[int] = []
    exponents: list[tuple[int, ...]] = []
    labels: list[str] = []
    for name, polynomial in zip("UF", symanzik(family), strict=True):
        for powers, coefficient in polynomial.terms.items():
            supports.append(sum(1 << i for i, power in enumerate(powers) if power))
            exponents.append(tuple(powers))
            labels.append(f"{name} {coefficient}")
    cut = sum(1 << i for i, line in enumerate(family.lines) if line.cut)
    return FamilyTerms(tuple(supports), tuple(exponents), tuple(labels), cut)


def all_sectors(propagators: Sequence[int]) -> tuple[int, ...]:
    """All sectors made of the given lines, the empty one included, simplest first."""
    found = [
        sum(1 << i for i in chosen)
        for count in range(len(propagators) + 1)
        for chosen in combinations(propagators, count)
    ]
    return tuple(sorted(found, key=sector_key))
