"""Numbers of master integrals of the shipped families against published ones.

The published numbers are quoted from memory of the sources named beside them; where a source's count is for
several families together, only the union is compared. The one-loop counts are checked by determinants too.
"""

from __future__ import annotations

from dataclasses import replace
from functools import cache
from pathlib import Path

import flint
import pytest

from ibpred.exact.primes import first_primes
from ibpred.family.definition import FamilyDefinition
from ibpred.family.polynomials import symanzik
from ibpred.family.reading import read_family
from ibpred.reduction.masters import Masters, find_masters
from ibpred.sectors.analysis import analyse
from ibpred.sectors.order import lines_of, sector_of
from ibpred.sectors.parameters import family_terms

FOLDER = Path(__file__).parents[2] / "families"

PUBLISHED = {
    # one loop
    "tadpole": (1, "one mass, one integral"),
    "bubble": (1, "G. 't Hooft, M. Veltman, Nucl. Phys. B153 (1979) 365"),
    "bubble-one-mass": (2, "G. Passarino, M. Veltman, Nucl. Phys. B160 (1979) 151"),
    "bubble-two-masses": (2, "G. Passarino, M. Veltman, Nucl. Phys. B160 (1979) 151"),
    "bubble-distinct-masses": (3, "G. Passarino, M. Veltman, Nucl. Phys. B160 (1979) 151"),
    "bubble-on-shell": (1, "N. Gray et al., Z. Phys. C48 (1990) 673"),
    "triangle-one-leg": (1, "Z. Bern, L. Dixon, D. Kosower, hep-ph/9306240"),
    "triangle-two-legs": (2, "Z. Bern, L. Dixon, D. Kosower, hep-ph/9306240"),
    "triangle-three-legs": (4, "Z. Bern, L. Dixon, D. Kosower, hep-ph/9306240"),
    "vertex-massive-fermion": (2, "R. Bonciani, P. Mastrolia, E. Remiddi, hep-ph/0301170"),
    "massless-box": (3, "Z. Bern, L. Dixon, D. Kosower, hep-ph/9306240; J. Henn, arXiv:1304.1806"),
    "box-one-leg": (4, "Z. Bern, L. Dixon, D. Kosower, hep-ph/9306240"),
    "box-two-opposite-legs": (5, "Z. Bern, L. Dixon, D. Kosower, hep-ph/9306240"),
    "box-two-adjacent-legs": (6, "Z. Bern, L. Dixon, D. Kosower, hep-ph/9306240"),
    "box-three-legs": (8, "Z. Bern, L. Dixon, D. Kosower, hep-ph/9306240"),
    "box-four-legs": (11, "Z. Bern, L. Dixon, D. Kosower, hep-ph/9306240"),
    "box-massive-loop": (6, "S. Caron-Huot, J. Henn, arXiv:1404.2922"),
    "box-massive-fermion": (5, "J. Henn, V. Smirnov, arXiv:1307.4083"),
    "pentagon": (11, "Z. Bern, L. Dixon, D. Kosower, hep-ph/9306240"),
    "pentagon-one-leg": (13, "S. Abreu et al., arXiv:2005.04195"),
    # two loops, vacuum and two legs
    "vacuum-one-mass": (2, "A. Davydychev, J. Tausk, Nucl. Phys. B397 (1993) 123"),
    "vacuum-two-massive-lines": (1, "A. Davydychev, J. Tausk, Nucl. Phys. B397 (1993) 123"),
    "vacuum-distinct-masses": (4, "A. Davydychev, J. Tausk, Nucl. Phys. B397 (1993) 123"),
    "sunrise": (1, "K. Chetyrkin, F. Tkachov, Nucl. Phys. B192 (1981) 159"),
    "sunrise-one-mass": (2, "O. Tarasov, hep-ph/9703319"),
    "sunrise-two-masses": (3, "O. Tarasov, hep-ph/9703319; R. Bonciani et al., hep-ph/0301170"),
    "sunrise-equal-masses": (3, "S. Laporta, E. Remiddi, hep-ph/0406160"),
    "sunrise-distinct-masses": (7, "O. Tarasov, hep-ph/9703319"),
    "kite": (2, "K. Chetyrkin, F. Tkachov, Nucl. Phys. B192 (1981) 159"),
    "self-energy-on-shell": (3, "D. Broadhurst, Z. Phys. C54 (1992) 599"),
    "heavy-quark-self-energy": (1, "D. Broadhurst, A. Grozin, hep-ph/9908362"),
    "heavy-quark-self-energy-two-loop": (2, "D. Broadhurst, A. Grozin, hep-ph/9908362"),
    # bananas: L of the top sector and one product of tadpoles; all masses distinct 2^(L+1) - 1
    "banana-three-loop": (4, "K. Boenisch et al., arXiv:2008.10574"),
    "banana-three-loop-distinct-masses": (15, "M. Kalmykov, B. Kniehl, arXiv:1612.06637"),
    "banana-four-loop": (5, "K. Boenisch et al., arXiv:2008.10574"),
    # four and five legs
    "planar-double-box": (8, "V. Smirnov, O. Veretin, hep-ph/9907385; J. Henn, arXiv:1304.1806"),
    "crossed-double-box": (12, "C. Anastasiou et al., hep-ph/0003261"),
    "planar-double-box-one-leg": (18, "S. Di Vita et al., arXiv:1408.3107"),
    "planar-double-box-massive-fermion": (23, "J. Henn, V. Smirnov, arXiv:1307.4083"),
    "pentabox": (61, "T. Gehrmann, J. Henn, N. Lo Presti, arXiv:1511.05409"),
    "post-minkowskian-box": (3, "J. Parra-Martinez, M. Ruf, M. Zeng, arXiv:2005.04236"),
}

TOGETHER = {
    ("planar-vertex", "crossed-vertex"): (
        4,
        "R. Gonsalves, Phys. Rev. D28 (1983) 1542; T. Gehrmann, T. Huber, D. Maitre, hep-ph/0507061",
    ),
    ("propagator-planar-ladder", "propagator-benz", "propagator-non-planar"): (
        6,
        "K. Chetyrkin, F. Tkachov, Nucl. Phys. B192 (1981) 159; P. Baikov, K. Chetyrkin, arXiv:1004.1153",
    ),
    ("heavy-quark-self-energy-two-loop", "heavy-quark-self-energy-crossed"): (
        2,
        "D. Broadhurst, A. Grozin, hep-ph/9908362",
    ),
}

UNPUBLISHED = {
    # no published count is known to us: these say only what was found
    "crossed-vertex": 3,
    "eikonal-vertex": 1,
    "heavy-quark-self-energy-crossed": 1,
    "kite-massive": 5,
    "pentagon-massive-loop": 22,
    "planar-vertex": 3,
    "planar-vertex-massive-fermion": 10,
    "planar-vertex-massive-loop": 13,
    "post-minkowskian-two-loop": 13,
    "propagator-benz": 4,
    "propagator-non-planar": 5,
    "propagator-planar-ladder": 5,
    "static-quark-cusp": 2,
    "static-quark-cusp-two-loop": 10,
    "triangle-massive-loop": 3,
}

SLOW = {"pentabox", "banana-four-loop"}


def cases(names):
    return [pytest.param(name, marks=[pytest.mark.slow] if name in SLOW else []) for name in sorted(names)]


@cache
def family_of(name: str) -> FamilyDefinition:
    path = FOLDER / f"{name}.toml"
    return read_family(path.read_text(), path.name, name)


@cache
def masters_of(name: str) -> Masters:
    family = family_of(name)
    return find_masters(family, analyse(family), first_primes(1)[0], 1)


@pytest.mark.parametrize("name", cases(PUBLISHED))
def test_published_count(name: str) -> None:
    count, _ = PUBLISHED[name]
    assert len(masters_of(name).masters) == count


@pytest.mark.parametrize("name", cases(UNPUBLISHED))
def test_unpublished_count_stays(name: str) -> None:
    assert len(masters_of(name).masters) == UNPUBLISHED[name]


@pytest.mark.parametrize("names", TOGETHER, ids="+".join)
def test_published_count_of_several_families(names: tuple[str, ...]) -> None:
    """All masters have one in their sector here, so sectors with equal U and F share theirs."""
    found = set()
    for name in names:
        terms = family_terms(family_of(name))
        for powers in masters_of(name).masters:
            sector = sector_of(powers)
            assert [sector_of(other) for other in masters_of(name).masters].count(sector) == 1
            found.add(terms.canonical(sector).key)
    assert len(found) == TOGETHER[names][0]


def test_every_family_has_an_expectation() -> None:
    shipped = {path.stem for path in FOLDER.glob("*.toml")}
    assert shipped == set(PUBLISHED) | set(UNPUBLISHED)
    assert not set(PUBLISHED) & set(UNPUBLISHED)


ONE_LOOP = [
    path.stem
    for path in sorted(FOLDER.glob("*.toml"))
    if len(family_of(path.stem).loops) == 1 and family_of(path.stem).graph is not None
]


@pytest.mark.parametrize("name", ONE_LOOP)
def test_one_loop_count_by_determinants(name: str) -> None:
    """A one-loop sector has a master iff its Gram and its Cayley determinant do not vanish.

    G. Duplancic, B. Nizic, hep-ph/0303184. Both are read off F = sum_(i<=j) Y_ij x_i x_j (halved on the
    diagonal); the Gram determinant is that of Y with a border of ones, up to a factor.
    """
    family = family_of(name)
    analysis = analyse(family)
    second = symanzik(family)[1]
    prime, point = 1_000_000_007, {v.name: 3**i + 10 * i + 2 for i, v in enumerate(family.invariants)}

    def entry(i: int, j: int) -> int:
        exponents = [0] * len(family.lines)
        exponents[i] += 1
        exponents[j] += 1
        value = second.terms.get(tuple(exponents), family.kinematic_ring.zero)
        number = value.substitute(point).to_fraction() * (2 if i == j else 1)
        return number.numerator * pow(number.denominator, -1, prime) % prime

    count = 0
    for sector in analysis.representatives:
        lines = lines_of(sector)
        cayley = [[entry(i, j) for j in lines] for i in lines]
        border = [[0, *[1] * len(lines)], *([1, *row] for row in cayley)]
        gram = flint.nmod_mat(len(border), len(border), [c for row in border for c in row], prime).det()
        modified = flint.nmod_mat(len(lines), len(lines), [c for row in cayley for c in row], prime).det()
        count += int(gram != 0 and modified != 0)
    assert len(masters_of(name).masters) == count


LINEAR = [path.stem for path in sorted(FOLDER.glob("*.toml")) if family_of(path.stem).graph is None]


@pytest.mark.parametrize("name", LINEAR)
def test_zero_sectors_of_linear_lines_vanish_by_identities(name: str) -> None:
    """Told of no zero sector (but those without a cut line), the identities alone leave the same masters."""
    family = family_of(name)
    analysis = analyse(family)
    cut = sum(1 << i for i, line in enumerate(family.lines) if line.cut)
    ignorant = replace(analysis, zero=frozenset(s for s in analysis.zero if s & cut != cut))
    found = find_masters(family, ignorant, first_primes(1)[0], 1)
    assert found.masters == masters_of(name).masters
