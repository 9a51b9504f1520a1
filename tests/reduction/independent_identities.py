"""Integration-by-parts identities modulo a prime from explicit vectors: no code of the package in between.

All momenta are vectors of residues in a space whose metric is the Gram matrix of the external momenta,
so a scalar product is linear in unknowns ``k_i.k_j`` and ``k_i.p_e``; these are solved for the lines by
Gauss' elimination.
"""

from __future__ import annotations

from fractions import Fraction

from ibpred.family.definition import FamilyDefinition

Shift = tuple[int, ...]


class Identities:
    """``int d/dk_i . (q prod_a D_a^(-powers_a)) = 0`` at one kinematic point modulo a prime."""

    def __init__(self, family: FamilyDefinition, point: dict[str, int], prime: int) -> None:
        self.family, self.point, self.prime = family, point, prime
        self.loops, self.legs = len(family.loops), len(family.external)
        self.count = len(family.lines)
        products = [(i, j) for i in range(self.loops) for j in range(i, self.loops)]
        products += [(i, self.loops + e) for i in range(self.loops) for e in range(self.legs)]
        self.place = {pair: n for n, pair in enumerate(products)}
        assert len(products) == self.count
        # D_a = sum_n matrix[a][n] product_n + constant_a
        self.matrix, self.constant = [], []
        for line in family.lines:
            row = [0] * self.count
            for i in range(self.loops):
                for j in range(self.loops):
                    row[self.place[min(i, j), max(i, j)]] += self.residue(line.quadratic[i][j])
                for e in range(self.legs):
                    row[self.place[i, self.loops + e]] += self.residue(line.linear[i][e])
            self.matrix.append([x % prime for x in row])
            self.constant.append(self.value(line.constant))
        self.inverse = self._inverse()
        self.gram = [[self.value(x) for x in row] for row in family.gram]

    def residue(self, number: Fraction) -> int:
        number = Fraction(number)
        return number.numerator * pow(number.denominator, -1, self.prime) % self.prime

    def value(self, function) -> int:
        return function.modular([self.point[name] for name in function.ring.names], self.prime)

    def _inverse(self) -> list[list[int]]:
        n, p = self.count, self.prime
        work = [row + [int(a == b) for b in range(n)] for a, row in enumerate(self.matrix)]
        for c in range(n):
            at = next(r for r in range(c, n) if work[r][c])
            work[c], work[at] = work[at], work[c]
            scale = pow(work[c][c], -1, p)
            work[c] = [x * scale % p for x in work[c]]
            for r in range(n):
                if r != c and work[r][c]:
                    factor = work[r][c]
                    work[r] = [(x - factor * y) % p for x, y in zip(work[r], work[c], strict=True)]
        return [row[n:] for row in work]

    def identity(self, i: int, q: int, powers: Shift) -> dict[Shift, int]:
        """q counts the loop momenta, then the external ones."""
        p, total = self.prime, {}

        def add(shift: list[int], value: int) -> None:
            key = tuple(a + s for a, s in zip(powers, shift, strict=True))
            total[key] = (total.get(key, 0) + value) % p

        if q == i:
            add([0] * self.count, self.point["d"])
        for a, line in enumerate(self.family.lines):
            if not powers[a]:
                continue
            # q . dD_a/dk_i as a polynomial of first degree in the scalar products
            constant, row = 0, [0] * self.count
            terms = [(m, 2 * self.residue(line.quadratic[i][m])) for m in range(self.loops)]
            terms += [(self.loops + e, self.residue(line.linear[i][e])) for e in range(self.legs)]
            for v, factor in terms:
                if min(v, q) >= self.loops:
                    constant += factor * self.gram[v - self.loops][q - self.loops]
                else:
                    row[self.place[min(v, q), max(v, q)]] += factor
            # product_n = sum_b inverse[n][b] (D_b - constant_b)
            up = [int(b == a) for b in range(self.count)]
            for b in range(self.count):
                weight = sum(row[n] * self.inverse[n][b] for n in range(self.count)) % p
                add([x - int(c == b) for c, x in enumerate(up)], -powers[a] * weight)
                constant -= weight * self.constant[b]
            add(up, -powers[a] * constant)
        return {key: value for key, value in total.items() if value}
