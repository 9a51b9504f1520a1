"""The record of a map between sectors: which lines become which, and what numerators become."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

from ibpred.exact.rational import Rational

Image = tuple[Rational, tuple[tuple[int, Rational], ...]]
"""(constant, ((line, coefficient), ...)): the polynomial ``constant + sum coefficient * D_line``."""


@dataclass(frozen=True)
class SectorMap:
    """A map from the integrals of one sector to those of an equivalent one (possibly itself).

    With ``(k, p) -> (loop_map (k, p), leg_map p)`` put into the lines of the source family, line j
    becomes `images[j]`, a combination of the lines of the target family, and every line of the
    source sector becomes exactly one line of the target sector (up to the sign of `flips`). So

    ``I_source(a) = integral over prod_j images[j]^(-a_j)``

    with positive powers for the lines of the source sector only.

    Attributes
    ----------
    source_family, target_family
        Names of the families.
    source, target
        Sector ids.
    lines
        ``lines[i]`` is the target line that line ``lines_of(source)[i]`` becomes.
    kind
        ``"momentum"``: found as a change of momenta, holds with numerators. ``"partial"``: a change
        of the momenta that the sector sees, holds for the numerators that see no more.
        ``"scalar"``: only U and F agree, holds for integrals without numerators. Dots are allowed.
    images
        For each line of the source family its image, in the target's kinematic ring, lines
        ascending, no zero coefficients; None for a line that a partial map does not reach; empty for a
        scalar map.
    loop_map
        L x (L + E): ``k_i -> sum_j loop_map[i][j] k_j + sum_e loop_map[i][L+e] p_e``; empty for a
        scalar map.
    leg_map
        E x E: ``p_e -> sum_f leg_map[e][f] p_f``; keeps all products of external momenta (a partial
        map those of the momenta that the sector sees). Empty for a scalar map.
    flips
        Cut lines of the source sector that become minus their target line. A cut stands for
        delta(D) and, with dots, its derivatives, so power a takes the sign (-1)^(a-1).
    """

    source_family: str
    target_family: str
    source: int
    target: int
    lines: tuple[int, ...]
    kind: str
    images: tuple[Image | None, ...]
    loop_map: tuple[tuple[Fraction, ...], ...]
    leg_map: tuple[tuple[Fraction, ...], ...]
    flips: tuple[int, ...] = ()

    @property
    def is_symmetry(self) -> bool:
        """Whether it takes a sector to itself."""
        return self.source == self.target and self.source_family == self.target_family

    def reaches(self, line: int) -> bool:
        """Whether the line has an image."""
        return bool(self.images) and self.images[line] is not None
