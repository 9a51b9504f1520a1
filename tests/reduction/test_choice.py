"""The choice of masters: its judgement agrees with exact differential equations; good masters stay."""

from __future__ import annotations

from dataclasses import replace
from itertools import combinations
from pathlib import Path

from ibpred.diffeq.derive import differential_system
from ibpred.exact.primes import first_primes
from ibpred.family.reading import read_family
from ibpred.identities.derivatives import derivative_templates
from ibpred.identities.rows import family_identities
from ibpred.reduction.choice import _cut, _pool, _sample, _score, choose_masters
from ibpred.reduction.masters import find_masters
from ibpred.sectors.analysis import analyse
from ibpred.sectors.order import sector_of

PRIMES = first_primes(20)
FILE = Path(__file__).parents[2] / "families" / "sunrise-equal-masses.toml"
FAMILY = read_family(FILE.read_text(encoding="utf-8"), FILE.name, FILE.stem)
ANALYSIS = analyse(FAMILY)
TEMPLATES = derivative_templates(FAMILY)
[MEMBER] = family_identities([FAMILY], [ANALYSIS])
CUT = replace(MEMBER, analysis=_cut(ANALYSIS, 0b111))
MASTERS = find_masters(FAMILY, ANALYSIS, PRIMES[0], 1)


def mixed_factors(masters):
    """Denominator factors that depend on d and on invariants, in the block of the sunrise."""
    system = differential_system(FAMILY, ANALYSIS, masters, PRIMES, 2).system
    found = set()
    for entries in system.matrices.values():
        for row, column, value in entries:
            if not sector_of(masters[row]) == sector_of(masters[column]) == 0b111:
                continue
            ring = value.ring
            bottom = ring.fraction(value.denominator, ring.context.constant(1))
            for polynomial, _ in bottom.factors()[1]:
                names = set(ring.fraction(polynomial, ring.context.constant(1)).variables())
                if "d" in names and len(names) > 1:
                    found.add(str(polynomial))
    return found


def test_scores_tell_denominators_that_split() -> None:
    own = tuple(m for m in MASTERS.masters if sector_of(m) == 0b111)
    pool = _pool(FAMILY, 0b111, own)
    samples = _sample(CUT, TEMPLATES, own, pool, PRIMES, 3)
    seen = {True: 0, False: 0}
    for chosen in combinations(range(len(pool)), 2):
        score = _score(samples, chosen)
        if score is None or seen[score[0] == 0] >= 4:
            continue
        wish = [pool[i] for i in chosen]
        masters = find_masters(FAMILY, ANALYSIS, PRIMES[0], 1, preferred=wish).masters
        assert (score[0] == 0) == (not mixed_factors(masters)), wish
        seen[score[0] == 0] += 1
    assert min(seen.values()) >= 2


def test_dependent_sets_have_no_score() -> None:
    own = tuple(m for m in MASTERS.masters if sector_of(m) == 0b111)
    # equal masses: a dot on one line is as good as a dot on another
    pool = (*own, (2, 1, 1, 0, 0), (1, 2, 1, 0, 0))
    samples = _sample(CUT, TEMPLATES, own, pool, PRIMES, 3)
    assert _score(samples, (2, 3)) is None
    assert _score(samples, (0, 2)) is not None


def test_good_masters_stay() -> None:
    assert choose_masters(FAMILY, ANALYSIS, PRIMES, 1) == MASTERS


def test_preferred_masters_are_kept_and_their_sector_left_alone() -> None:
    wish = ((2, 1, 1, 0, 0), (1, 1, 1, -1, 0))
    found = choose_masters(FAMILY, ANALYSIS, PRIMES, 1, wish)
    assert set(wish) <= set(found.masters)
    assert len(found.masters) == len(MASTERS.masters)


def test_the_choice_is_told() -> None:
    assert choose_masters(FAMILY, ANALYSIS, PRIMES, 1).exchanged() == ((), ())
    path = FILE.parent / "static-quark-cusp-two-loop.toml"
    family = read_family(path.read_text(encoding="utf-8"), path.name, path.stem)
    analysis = analyse(family)
    found = choose_masters(family, analysis, PRIMES, 1)
    chosen, others = found.exchanged()
    assert chosen
    assert sorted(map(sector_of, chosen)) == sorted(map(sector_of, others))
    assert found.by_order == find_masters(family, analysis, PRIMES[0], 1).masters
    assert {*found.masters} - {*chosen} == {*found.by_order} - {*others}
