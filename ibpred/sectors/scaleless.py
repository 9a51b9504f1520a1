"""Zero sectors: integrals without a scale vanish in dimensional regularisation.

A sector is scaleless if a rescaling ``x_i -> lambda^(w_i) x_i`` of its parameters multiplies U and F
by lambda each: then the integral equals itself times a power of lambda that depends on d. With
G = U + F this reads ``sum_i w_i x_i dG/dx_i = G`` with constant w, the criterion of R.N. Lee,
arXiv:1310.1145 (and R.N. Lee, A.A. Pomeransky, arXiv:1308.6676). Monomial by monomial it says
``w . exponents = 1``, so coefficients do not matter and integer linear algebra decides.
"""

from __future__ import annotations

from collections.abc import Sequence

import flint

from ibpred.family.definition import FamilyDefinition
from ibpred.sectors.order import lines_of
from ibpred.sectors.parameters import FamilyTerms, all_sectors, family_terms


def is_scaleless(exponents: Sequence[tuple[int, ...]]) -> bool:
    """Whether a constant w with ``w . e = 1`` for all given exponents exists (exact)."""
    rows = sorted(set(exponents))
    if not rows or not rows[0]:
        return not rows
    bare = flint.fmpz_mat([list(row) for row in rows])
    extended = flint.fmpz_mat([[*row, 1] for row in rows])
    return bool(bare.rank() == extended.rank())


def zero_sectors(family: FamilyDefinition) -> frozenset[int]:
    """Sectors of propagators whose integrals vanish.

    A sector is zero if its U vanishes (a loop is missing), if it is scaleless, or if it lacks a cut
    line. Subsectors of zero sectors are zero.
    """
    return zero_sectors_of(family_terms(family), family.propagators)


def zero_sectors_of(terms: FamilyTerms, propagators: Sequence[int]) -> frozenset[int]:
    """Zero sectors from the monomials of U and F; see `zero_sectors`."""
    zero: set[int] = set()
    for sector in all_sectors(propagators):
        # a sector above one that is not zero is not zero: more monomials, more conditions
        above = all(sector ^ (1 << i) in zero for i in lines_of(sector))
        uncut = sector & terms.cut != terms.cut
        if uncut or (above and _is_zero(terms, sector)):
            zero.add(sector)
    return frozenset(zero)


def _is_zero(terms: FamilyTerms, sector: int) -> bool:
    found = terms.of_sector(sector)
    if not any(label.startswith("U") for _, label in found):
        return True
    return is_scaleless([exponents for exponents, _ in found])
