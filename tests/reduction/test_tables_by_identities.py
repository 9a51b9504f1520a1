"""Every coefficient of a table takes part in identities made by separate code, at random points.

The identities come from `independent_identities` (explicit scalar products modulo a prime), not from
the package's templates. Each wanted integral occurs in one; all other integrals of it are reduced as well.
"""

from __future__ import annotations

import random
from itertools import combinations_with_replacement
from pathlib import Path

import pytest
from independent_identities import Identities

from ibpred.exact.primes import first_primes
from ibpred.family.reading import read_family
from ibpred.family.units import set_unit
from ibpred.reduction.choice import choose_masters
from ibpred.reduction.table import reduce_integrals
from ibpred.sectors.analysis import analyse
from ibpred.sectors.order import lines_of

FAMILIES = Path(__file__).parents[2] / "families"
PRIMES = first_primes(30)
CHECKING = first_primes(1, skip=300)[0]
_TRIES = 200


def integrals(sector: int, count: int, rank: int) -> list[tuple[int, ...]]:
    """The integrals of a sector without dots, of exactly this rank."""
    inside = lines_of(sector)
    others = [i for i in range(count) if i not in inside]
    found = []
    for chosen in combinations_with_replacement(others, rank):
        powers = [0] * count
        for i in inside:
            powers[i] = 1
        for i in chosen:
            powers[i] -= 1
        found.append(tuple(powers))
    return found


def identity_with(source: Identities, wanted: tuple[int, ...], rng: random.Random) -> dict:
    """An identity that the wanted integral takes part in, with seeds like it."""
    family = source.family
    for _ in range(_TRIES):
        i, q = rng.randrange(source.loops), rng.randrange(source.loops + source.legs)
        seed = list(wanted)
        for line in rng.sample(range(source.count), rng.choice((1, 2))):
            seed[line] += rng.choice((1, -1, 0)) if not family.lines[line].numerator else rng.choice((1, 0))
        if any(line.numerator and a > 0 for line, a in zip(family.lines, seed, strict=True)):
            continue
        found = source.identity(i, q, tuple(seed))
        if wanted in found and len(found) > 1:
            return found
    raise AssertionError(f"no identity with {wanted} was met")


@pytest.mark.parametrize(
    ("name", "rank", "every"),
    [
        ("box-one-leg", 2, 1),
        ("sunrise-two-masses", 2, 1),
        ("planar-double-box", 2, 9),
        ("planar-vertex-massive-fermion", 1, 3),
        ("planar-double-box-one-leg", 1, 25),
        ("heavy-quark-self-energy-two-loop", 1, 1),
        ("static-quark-cusp-two-loop", 1, 2),
        ("post-minkowskian-two-loop", 1, 6),
        pytest.param("planar-double-box", 3, 1, marks=pytest.mark.slow),
        pytest.param("crossed-double-box", 2, 1, marks=pytest.mark.slow),
        pytest.param("planar-double-box-massive-fermion", 2, 3, marks=pytest.mark.slow),
        pytest.param("pentabox", 1, 12, marks=pytest.mark.slow),
    ],
)
def test_tables_by_separate_identities(name: str, rank: int, every: int) -> None:
    file = FAMILIES / f"{name}.toml"
    family = read_family(file.read_text(encoding="utf-8"), file.name, name)
    analysis = analyse(family)
    masters = choose_masters(family, analysis, PRIMES, 1).masters
    rng = random.Random(9)
    point = {v: rng.randrange(2, CHECKING) for v in ("d", *(v.name for v in family.invariants))}
    if family.unit is not None:
        point[family.unit] = 1
    source = Identities(family, point, CHECKING)
    count = len(family.lines)
    asked = [
        powers
        for sector in analysis.nonzero
        for r in range(1, rank + 1)
        for powers in integrals(sector, count, r)
    ][::every]
    equations = [identity_with(source, powers, rng) for powers in asked]
    wanted = sorted({powers for equation in equations for powers in equation})
    table = reduce_integrals(family, analysis, wanted, masters, PRIMES, 5)
    values = {}
    internal = [point[v] for v in family.internal_ring.names]
    for powers, row in table.reductions.items():
        values[powers] = {m: set_unit(c, family).modular(internal, CHECKING) for m, c in row}
    touched = set()
    for equation in equations:
        total: dict[int, int] = {}
        for powers, weight in equation.items():
            touched.add(powers)
            for master, value in values[powers].items():
                total[master] = (total.get(master, 0) + weight * value) % CHECKING
        assert not any(total.values()), equation
    assert touched >= set(asked)
